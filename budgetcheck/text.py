"""Text that came from outside, made visible before it reaches any screen, file or message."""

from __future__ import annotations

import unicodedata

_HIDDEN = frozenset({"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"})
"""Unicode categories that a reader cannot see or that steer a terminal: controls (C0, DEL, C1), bidirectional and zero-width
format characters, surrogates, private use, unassigned, line and paragraph separators."""

_BLANK_LETTERS = frozenset("\u115f\u1160\u3164\uffa0\u2800")
"""Letters and symbols with no ink: Hangul fillers, the empty Braille pattern."""

_MOST_MARKS = 3
"""Combining marks kept in a row; longer runs smear over neighbouring lines."""


def visible(text: str, limit: int = 80) -> str:
    """The text on one line, hidden characters written as escapes, at most about `limit` characters.

    A longer text is cut in the middle, so that both its ends stay recognisable.
    """
    if text.isascii() and text.isprintable():
        return _shortened(text, limit)
    # far more than a cell may hold is cut before the walk, so that a huge cell costs nothing
    if len(text) > 4 * limit:
        text = text[: 2 * limit] + "…" + text[-2 * limit :]
    shown: list[str] = []
    marks = 0
    for character in text:
        category = unicodedata.category(character)
        marks = marks + 1 if category in ("Mn", "Me") else 0
        if marks > _MOST_MARKS:
            continue
        shown.append(_escaped(character) if category in _HIDDEN or character in _BLANK_LETTERS else character)
    return _shortened("".join(shown), limit)


def folded(header: str) -> str:
    """A header as it is compared: without blanks around it and, in ASCII, without case. Other letters are compared as they are,
    since case folding would make known names of look-alikes."""
    header = header.strip()
    return header.casefold() if header.isascii() else header


def _escaped(character: str) -> str:
    code = ord(character)
    if code <= 0xFF:
        return f"\\x{code:02x}"
    return f"\\u{code:04x}" if code <= 0xFFFF else f"\\U{code:08x}"


def _shortened(text: str, limit: int) -> str:
    if len(text) <= limit:
        return text
    head = (limit - 1) // 2
    return f"{text[:head]}…{text[head + 1 - limit :]}"


def quoted(text: str, limit: int = 40) -> str:
    """The visible text in single quotes, for a message."""
    return f"'{visible(text, limit)}'"
