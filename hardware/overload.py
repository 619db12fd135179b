"""The word that stands instead of a figure above the range, such as OL or OVER."""

from __future__ import annotations

from monitor.core.keys import Table
from monitor.core.numerals import figure


def overload_word(table: Table, separator: str) -> str:
    """The option overload, "" where it is absent; separator: "" stands for blanks."""
    word = table.text("overload", "").strip()
    if word and figure(word) is not None:
        raise table.error("overload", f"{word!r} reads as a figure, or as none; name a word")
    if len(word.split(separator or None)) > 1:
        raise table.error("overload", f"{word!r} holds the separator; name one word")
    return word
