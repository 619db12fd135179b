"""Numbers as files and boards write them: digits, point, sign, exponent, and nothing else."""

from __future__ import annotations

import math
import re

_NUMBER = re.compile(r"[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?", re.ASCII)
_NONE = ("", "nan", "+nan", "-nan")


def figure(text: str) -> float | None:
    """The number of a text; nan where it is blank or says nan; None where it is no number.

    Stricter than float(): no infinity, no digits of other scripts, no underscores between digits.
    """
    text = text.strip()
    if text.lower() in _NONE:
        return math.nan
    return float(text) if _NUMBER.fullmatch(text) else None
