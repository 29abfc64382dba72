"""Pages that lie over a view: help, and a question with one line of answer."""

from __future__ import annotations

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import Vertical, VerticalScroll
from textual.screen import ModalScreen
from textual.widgets import Input, Static

from gnssmon.dashboard.panels import panel
from gnssmon.dashboard.views import View

KEYS = """\
1 to 8        views                       w   next window of time
m             set the mark to now         f   freeze the picture
a             mark open alarms as seen    t   one signal, one kind of sentence
up, down      older, newer row            n   next source
ctrl+p        all commands                q   quit

Of a log:
space         pause, go on                + - faster, slower
left, right   10 s back, on               with shift: a minute
, .           one epoch back, on          g   go to a time
[ ]           event before, next"""


class HelpPage(ModalScreen[None]):
    """What the figures of a view mean, and the keys."""

    BINDINGS: ClassVar[list[BindingType]] = [Binding("escape,q,question_mark", "dismiss", "Close")]

    def __init__(self, view: View) -> None:
        super().__init__()
        self._view = view

    def compose(self) -> ComposeResult:
        texts = [f"{panel(key).title}\n\n{panel(key).help}" for key in self._view.panels()]
        with VerticalScroll():
            yield Static("\n\n".join([f"Keys\n\n{KEYS}", *texts]), markup=False)


class Question(ModalScreen[str | None]):
    """Asks for one line; escape gives None."""

    BINDINGS: ClassVar[list[BindingType]] = [Binding("escape", "dismiss(None)", "Cancel")]

    def __init__(self, words: str) -> None:
        super().__init__()
        self._words = words

    def compose(self) -> ComposeResult:
        with Vertical():
            yield Static(self._words, markup=False)
            yield Input()

    def on_input_submitted(self, event: Input.Submitted) -> None:
        self.dismiss(event.value)
