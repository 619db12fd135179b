"""Columns of text turned into times and counts, whole columns at once. Pure."""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from monitor.core.numerals import figure
from monitor.core.readings import MISSING, NS_PER_S

NO_TIME = -(2**63)
"""A time that could not be read."""

_STAMP = re.compile(
    r"((?:19|20|21)\d\d-\d\d-\d\d)[Tt ](\d\d:\d\d:\d\d(?:\.\d{1,9})?)"
    r" ?(?:[Zz]|([+-]\d\d):?(\d\d))?",
    re.ASCII,
)
_FURTHEST_S = 9_000_000_000
"""Seconds from 1970 (year 2255), so that ns fit in 64 bits."""
_ORDINARY = frozenset("0123456789+-.eE nNaA\t\r")
"""Of these characters float() takes just what figure() takes; a column of them is read at once."""


def is_stamp(text: str) -> bool:
    """Whether text is written as a date and a time of day."""
    return _STAMP.fullmatch(text.strip()) is not None


def times_ns(texts: Sequence[str], stamps: bool) -> NDArray[np.int64]:
    """UTC (ns since 1970) of each text, NO_TIME where it is none.

    stamps: texts are RFC 3339 or 'YYYY-MM-DD hh:mm:ss' (UTC where no offset is given); otherwise
    seconds, as a decimal number.
    """
    return _from_stamps(texts) if stamps else _from_seconds(texts)


def _from_stamps(texts: Sequence[str]) -> NDArray[np.int64]:
    matches = [_STAMP.fullmatch(text.strip()) for text in texts]
    plain = [f"{m[1]}T{m[2]}" if m else "NaT" for m in matches]
    times = _datetimes(plain)
    for i, m in enumerate(matches):
        if m and m[3] and times[i] != NO_TIME:
            minutes = int(m[4]) if m[3][0] == "+" else -int(m[4])
            times[i] -= (int(m[3]) * 60 + minutes) * 60 * NS_PER_S
    return times


def _datetimes(plain: list[str]) -> NDArray[np.int64]:
    try:
        stamps = np.array(plain, "datetime64[ns]")
    except ValueError:
        stamps = np.array([_datetime(text) for text in plain], "datetime64[ns]")
    return stamps.astype(np.int64)


def _datetime(text: str) -> np.datetime64:
    try:
        return np.datetime64(text, "ns")
    except ValueError:
        return np.datetime64("NaT", "ns")


def _from_seconds(texts: Sequence[str]) -> NDArray[np.int64]:
    seconds, _ = floats(texts)
    good = np.abs(seconds) < _FURTHEST_S
    whole = np.floor(np.where(good, seconds, 0.0))
    rest = np.rint((np.where(good, seconds, 0.0) - whole) * NS_PER_S)
    times = whole.astype(np.int64) * NS_PER_S + rest.astype(np.int64)
    return np.where(good, times, NO_TIME)


def floats(texts: Sequence[str]) -> tuple[NDArray[np.float64], int]:
    """Figures of the texts, nan where one is empty or none; how many were neither."""
    if set().union(*texts) <= _ORDINARY:
        filled = [text if text and not text.isspace() else "nan" for text in texts]
        try:
            return np.array(filled, np.str_).astype(np.float64), 0
        except ValueError:
            pass  # one by one, to find those that are none
    values = [figure(text) for text in texts]
    wrong = sum(value is None for value in values)
    return np.array([np.nan if v is None else v for v in values]), wrong


def counts(values: NDArray[np.float64], resolution: float) -> NDArray[np.int32]:
    """Nearest counts of values at resolution (unit per count); MISSING where there is none."""
    scaled = np.rint(values / resolution)
    good = np.abs(scaled) < -MISSING
    return np.where(good, np.where(good, scaled, 0.0), float(MISSING)).astype(np.int32)
