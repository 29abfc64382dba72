"""Untrusted bytes and text → text that is safe on a terminal, in HTML source and in a log line.

No control character, escape sequence, bidirectional override or line break gets through. Markup of a screen library
is text's own business there: give it to a widget as plain text, never as markup.
"""

from __future__ import annotations

import unicodedata

LONGEST = 1024
"""Characters kept of one piece of untrusted text: longer than any sentence, short enough for any screen."""


def printable(text: str | bytes, longest: int = LONGEST) -> str:
    """Return ``text`` with everything that is not a plain printable character written as ``\\xhh`` or ``\\uhhhh``.

    Bytes are read as ASCII; anything above 0x7E is escaped. At most ``longest`` characters are kept, the last one
    then being an ellipsis.
    """
    if isinstance(text, bytes):
        text = text[: longest + 1].decode("latin-1")
        safe = "".join(c if " " <= c <= "~" else f"\\x{ord(c):02x}" for c in text)
    else:
        safe = "".join(c if _plain(c) else _escaped(c) for c in text[: longest + 1])
    return safe if len(safe) <= longest else safe[: longest - 1] + "…"


def _plain(character: str) -> bool:
    # Categories C* are controls, format (bidirectional) marks, surrogates, private, unassigned; Zl and Zp break lines.
    category = unicodedata.category(character)
    return not (category.startswith("C") or category in {"Zl", "Zp"})


def _escaped(character: str) -> str:
    code = ord(character)
    return f"\\x{code:02x}" if code < 0x100 else f"\\u{code:04x}" if code < 0x10000 else f"\\U{code:08x}"
