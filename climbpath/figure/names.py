"""Names from files made fit to be shown: nothing in them moves a cursor or turns text around."""

from __future__ import annotations

import unicodedata

HIDDEN_CATEGORIES = frozenset({"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"})
"""Unicode categories without a glyph of their own; such characters are shown by their code."""
ELLIPSIS = "…"
SHORT_CODES = {"\n": "\\n", "\r": "\\r", "\t": "\\t"}


def code_of(character: str) -> str:
    """The code of one character in plain letters, such as ``\\n``, ``\\x1b`` or ``\\u202e``."""
    if character in SHORT_CODES:
        return SHORT_CODES[character]
    code = ord(character)
    if code < 0x100:
        return f"\\x{code:02x}"
    return f"\\u{code:04x}" if code < 0x10000 else f"\\U{code:08x}"


def text_width(text: str) -> int:
    """Columns that ``text`` takes in a terminal: wide letters two, combining marks none."""
    return sum(
        0
        if unicodedata.category(character) in ("Mn", "Me")
        else 2
        if unicodedata.east_asian_width(character) in "WF"
        else 1
        for character in text
    )


def printable(text: str, limit: int = 60) -> str:
    """``text`` on one line of at most ``limit`` columns, with hidden characters by their code.

    Text that is cut ends in an ellipsis. At most ``4 * limit`` characters are looked at, so that
    a long run of combining marks is cut too.
    """
    parts: list[str] = []
    for character in text[: 4 * limit]:
        hidden = unicodedata.category(character) in HIDDEN_CATEGORIES
        parts.append(code_of(character) if hidden else character)
    whole = "".join(parts)
    if len(text) <= 4 * limit and text_width(whole) <= limit:
        return whole
    while parts and text_width("".join(parts)) > limit - 1:
        parts.pop()
    return "".join(parts) + ELLIPSIS


def padded(text: str, width: int, right: bool = False) -> str:
    """``text`` filled with blanks to ``width`` columns, on its left if ``right``."""
    blanks = " " * max(0, width - text_width(text))
    return blanks + text if right else text + blanks
