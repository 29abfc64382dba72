"""The terminal under the dashboard: it may go away or stand still, and then nothing may wait for it for ever.

The screen library writes from a thread of its own. A write that fails ends that thread, and thirty writes later the
whole program waits for it; a write into a terminal that nobody reads any more waits in the kernel, and the program
behind it; and end of input reads as an endless pause, at the cost of half a processor core. So here

- a write that fails is dropped, and says that the terminal is gone;
- a thread looks once a second whether it is gone, and takes the signals that ask for an end;
- the dashboard is then asked to end. If it has not after a few seconds, because it waits for the terminal, the
  recordings are closed from here and the process ends.
"""

from __future__ import annotations

import asyncio
import os
import select
import signal
import sys
import threading
from collections.abc import Callable
from contextlib import suppress
from typing import TYPE_CHECKING, TextIO, cast

from gnssmon import errors

if TYPE_CHECKING:
    from textual.app import App
    from textual.driver import Driver

LOOK_S = 1.0
"""How often the terminal is asked whether it is still there."""

GRACE_S = 3.0
"""For an orderly end; a slow line paints its last frame in less."""

CLOSING_S = 10.0
"""For closing the recordings, on a disk that is slow."""

SIGNALS = ("SIGHUP", "SIGTERM", "SIGINT")


class Sturdy:
    """A terminal to write to, that never raises: what it does not take is dropped."""

    def __init__(self, file: TextIO, gone: Callable[[], None]) -> None:
        self._file = file
        self._gone = gone

    def write(self, text: str) -> int:
        """Write, or tell that it is gone."""
        try:
            return self._file.write(text)
        except (OSError, ValueError):
            self._gone()
            return len(text)

    def flush(self) -> None:
        """Flush, or tell that it is gone."""
        try:
            self._file.flush()
        except (OSError, ValueError):
            self._gone()

    def fileno(self) -> int:
        """Of the terminal."""
        return self._file.fileno()

    def isatty(self) -> bool:
        """As it says itself."""
        return self._file.isatty()


class Watch:
    """Ends a dashboard when its terminal is gone or someone outside asks for it; by force where it must."""

    def __init__(self, leave: Callable[[], None], put_away: Callable[[], None], fileno: int) -> None:
        """``leave`` asks the dashboard to end, from any thread; ``put_away`` closes what must be closed."""
        self._leave, self._put_away, self._fileno = leave, put_away, fileno
        self._attributes: list[object] | None = None
        self._wish, self._ended = threading.Event(), threading.Event()
        self._former: dict[signal.Signals, object] = {}
        self._thread = threading.Thread(target=self._run, name="gnssmon terminal", daemon=True)

    def start(self) -> None:
        """Take the signals and begin to look; in the main thread."""
        with suppress(ImportError, OSError, ValueError):
            import termios

            with suppress(termios.error):
                self._attributes = termios.tcgetattr(self._fileno)
        for name in SIGNALS:
            with suppress(AttributeError, ValueError, OSError):
                number = getattr(signal, name)
                self._former[number] = signal.signal(number, lambda *_: self.ask())
        self._thread.start()

    def ask(self) -> None:
        """The dashboard should end."""
        self._wish.set()

    def stop(self) -> None:
        """The dashboard has ended."""
        self._ended.set()
        self._wish.set()
        for number, handler in self._former.items():
            with suppress(ValueError, OSError, TypeError):
                signal.signal(number, handler)  # type: ignore[arg-type]
        self._former.clear()

    def _run(self) -> None:
        while not self._wish.wait(LOOK_S):
            if is_gone(self._fileno):
                self._wish.set()
        if self._ended.is_set():
            return
        self._leave()
        if self._ended.wait(GRACE_S):
            return
        closing = threading.Thread(target=self._put_away, daemon=True)
        closing.start()
        closing.join(CLOSING_S)
        if not self._ended.wait(LOOK_S):
            self._as_it_was()
            os._exit(errors.INTERRUPTED)

    def _as_it_was(self) -> None:
        """Echo and line editing for whoever uses the terminal next."""
        if self._attributes is not None:
            import termios

            with suppress(termios.error, OSError):
                termios.tcsetattr(self._fileno, termios.TCSANOW, self._attributes)  # type: ignore[arg-type]


def is_gone(fileno: int) -> bool:
    """Whether the terminal was hung up. A system that cannot tell says no."""
    try:
        poll = select.poll()
        poll.register(fileno, select.POLLHUP)
        return any(event & (select.POLLHUP | select.POLLERR | select.POLLNVAL) for _, event in poll.poll(0))
    except (AttributeError, OSError):
        return False


def driver(put_away: Callable[[], None]) -> type[Driver] | None:
    """The screen library's driver for this system, on a watched terminal; None: its own choice."""
    if sys.platform == "win32":
        return None
    from textual.drivers.linux_driver import LinuxDriver

    class WatchedDriver(LinuxDriver):
        """Writes to a terminal that may go away."""

        def __init__(self, app: App[object], **options: object) -> None:
            super().__init__(app, **options)  # type: ignore[arg-type]
            loop = asyncio.get_running_loop()

            def leave() -> None:
                with suppress(RuntimeError):  # The loop has ended by itself.
                    loop.call_soon_threadsafe(app.exit)

            self._watch = Watch(leave, put_away, self.fileno)
            self._file = Sturdy(cast(TextIO, self._file), self._watch.ask)  # type: ignore[assignment]
            self._watch.start()

        def close(self) -> None:
            super().close()
            self._watch.stop()

    return WatchedDriver
