"""What is known of a figure: a value, at least, below, or no bound at all. Pure: no words."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum
from typing import Any

from monitor.core.alarms import ENOUGH_SHARE
from monitor.core.flags import LOWER_BOUND, UPPER_BOUND
from monitor.core.flags import words as flag_words
from monitor.core.interval import interval

LOWER_WORDS = frozenset(flag_words(int(LOWER_BOUND)))
UPPER_WORDS = frozenset(flag_words(int(UPPER_BOUND)))


class Kind(StrEnum):
    """NONE: no figure. OPEN: a figure that is neither a lower nor an upper bound."""

    NONE = "none"
    VALUE = "value"
    AT_LEAST = "at_least"
    BELOW = "below"
    OPEN = "open"


@dataclass(frozen=True, slots=True)
class Window:
    """The averaging time behind a figure. share: its valid share, None where it is not told.

    lower, upper: the words of the flags that make a figure a lower or an upper bound.
    """

    averaging_s: int
    share: float | None
    lower: tuple[str, ...]
    upper: tuple[str, ...]

    @property
    def thin(self) -> bool:
        """Whether too little is valid for its mean to speak for the averaging time."""
        return self.share is not None and not self.share >= ENOUGH_SHARE

    def kind(self, low: float | None, mean: float | None) -> Kind:
        """What a figure of this window is."""
        if mean is None and not (low is not None and low > 0):
            return Kind.NONE
        if self.upper:
            return Kind.OPEN if self.lower or mean is None else Kind.BELOW
        if self.lower or self.thin or mean is None:
            return Kind.AT_LEAST if low is not None else Kind.OPEN
        return Kind.VALUE


@dataclass(frozen=True, slots=True)
class Ratio:
    """One exposure ratio: gaps as zero, of the valid part, gaps at the period's maximum.

    u_db: expanded uncertainty of the ratio in dB; None where it is not told. added: that of what
    adds to it.
    """

    low: float | None
    mean: float | None
    high: float | None
    u_db: float | None
    verdict: str
    window: Window
    added: float = 0.0

    @property
    def kind(self) -> Kind:
        """What the ratio is."""
        return self.window.kind(self.low, self.mean)

    @property
    def stands(self) -> float | None:
        """The figure that is said first, with U counted in a bound; None where there is none."""
        if self.kind is Kind.NONE:
            return None
        if self.kind is Kind.AT_LEAST:
            return self.bottom
        if self.kind is Kind.BELOW:
            return self.mean if self.high is None else self.high
        return self.low if self.mean is None else self.mean

    @property
    def bottom(self) -> float | None:
        """Lower end of the interval; None where nothing bounds it below."""
        if self.low is None or self.kind not in (Kind.VALUE, Kind.AT_LEAST):
            return None
        return float(interval(self.low, self.low, self.u_db or 0.0, self.added).low)

    @property
    def top(self) -> float | None:
        """Upper end of the interval; None where nothing bounds it above."""
        if self.high is None or self.mean is None or self.window.lower:
            return None
        if self.window.upper:  # below the detection limit it is the bound already
            return self.high
        return float(interval(self.high, self.high, self.u_db or 0.0, self.added).high)

    @property
    def holds_limit(self) -> bool:
        """Whether the interval holds the limit, an end that nothing bounds being open."""
        if self.bottom is None and self.top is None:
            return False
        return (self.bottom or 0.0) <= 1.0 and (self.top is None or self.top >= 1.0)

    @property
    def exceeds(self) -> bool:
        """Whether the limit is known to be exceeded."""
        return self.verdict == "exceeds"

    @property
    def left(self) -> float | None:
        """What is left of the limit at the least; None where that cannot be said."""
        if self.verdict != "conforms" or self.u_db is None or self.top is None:
            return None
        return max(0.0, 1.0 - self.top)


def number(row: Mapping[str, Any] | None, key: str) -> float | None:
    """A finite figure of a row, else None."""
    value = None if row is None else row.get(key)
    if isinstance(value, (int, float)) and math.isfinite(value):
        return float(value)
    return None


def window(field: Mapping[str, Any], flags: Sequence[str] = ()) -> Window:
    """The window of a field's row; flags: those of all windows, where the row tells none itself."""
    carried = [str(flag) for flag in field.get("flags", flags)]
    return Window(
        averaging_s=int(field.get("averaging_s") or 0),
        share=number(field, "valid_share"),
        lower=tuple(flag for flag in carried if flag in LOWER_WORDS),
        upper=tuple(flag for flag in carried if flag in UPPER_WORDS),
    )


def ratio(
    exposure: Mapping[str, Any], fields: Sequence[Mapping[str, Any]], flags: Sequence[str] = ()
) -> Ratio:
    """The ratio of an exposure's row, its window that of the field of its averaging time."""
    averaging_s = exposure.get("averaging_s")
    same = [one for one in fields if one.get("averaging_s") == averaging_s]
    return Ratio(
        low=number(exposure, "ratio_low"),
        mean=number(exposure, "ratio_mean"),
        high=number(exposure, "ratio_high"),
        u_db=number(exposure, "u_db"),
        verdict=str(exposure.get("verdict", "undecided")),
        window=window(same[0] if same else {"averaging_s": averaging_s}, flags),
        added=number(exposure, "added_ratio") or 0.0,
    )
