"""What a ratio or a field strength is, in words that claim no more than is known. Pure."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from dashboard import bounds, words
from dashboard.bounds import Kind, Ratio, Window
from monitor.core.interval import interval as within

COUNTED = "U is counted in the bound"
SEEN = "what is seen stays"
"""Of a part of the field: it is below its detection limit, the whole may not be."""


def figure(ratio: Ratio) -> str:
    """'0.31', 'at least 27', 'below 0.02' or 'about 0.4'; 'no figure' where there is none."""
    stands = ratio.stands
    if stands is None:
        return words.ratio_figure(None)
    if ratio.kind is Kind.AT_LEAST:
        return f"at least {words.rounded_down(stands)}"
    if ratio.kind is Kind.BELOW:
        return f"below {words.rounded_up(stands)}"
    if ratio.kind is Kind.OPEN and ratio.window.upper:
        return f"{SEEN} below {words.rounded_up(stands)}"
    about = "about " if ratio.kind is Kind.OPEN else ""
    return about + words.ratio_figure(stands)


def of_limit(ratio: Ratio) -> str:
    """The figure as a share of the limit."""
    if ratio.kind is Kind.VALUE:
        return words.of_limit(ratio.stands)
    return figure(ratio) if ratio.stands is None else f"{figure(ratio)} of the limit"


def interval(ratio: Ratio) -> str:
    """The interval in words, but for an end that the figure has said; '' where there is none."""
    bottom, top = ratio.bottom, ratio.top
    by = "gaps and expanded uncertainty" if ratio.u_db is not None else "gaps alone"
    said = ""
    if ratio.kind is Kind.AT_LEAST or (bottom is not None and words.rounded_down(bottom) == "0"):
        bottom = None  # said as the figure, or nothing that is worth saying
    if bottom is not None and top is not None:
        said = f"between {words.rounded_down(bottom)} and {words.rounded_up(top)}, by {by}"
    elif ratio.kind is Kind.AT_LEAST and top is None:
        said = f"by {by}; how much more is not known"
    elif ratio.kind is Kind.BELOW and top is not None:
        said = f"by {by}"
    elif top is not None:
        said = f"not above {words.rounded_up(top)}, by {by}"
    elif ratio.stands is not None:
        said = "neither an upper nor a lower bound"
    return said + ("; the uncertainty is not stated" if said and ratio.u_db is None else "")


def valid_part(window: Window) -> str:
    """'5 s of 30 min', rounded down."""
    whole = words.duration(window.averaging_s)
    return f"{words.duration((window.share or 0.0) * window.averaging_s)} of {whole}"


def in_valid_part(ratio: Ratio) -> str:
    """What the valid part of a thin window says by itself; '' where that is nothing."""
    if not ratio.window.thin or ratio.mean is None or ratio.kind is not Kind.AT_LEAST:
        return ""
    return f"{words.ratio_figure(ratio.mean)} in the {valid_part(ratio.window)} that are valid"


def why(ratio: Ratio, reasons: Sequence[str]) -> list[str]:
    """Why nothing can be decided. The first reason of the daemon tells the figures compared."""
    found = [str(reason) for reason in reasons[1:]]
    if ratio.mean is None and ratio.stands is not None:
        found.insert(0, "no moment is valid on every channel")
    elif ratio.holds_limit and (ratio.kind is not Kind.AT_LEAST or (ratio.low or 0) >= 1):
        found.insert(0, "the interval holds the limit")
    return found or [str(reason) for reason in reasons[:1]]


def left(ratio: Ratio, reasons: Sequence[str]) -> str:
    """What is left for a person in a controlled place, or why that cannot be said."""
    if ratio.left is not None:
        if ratio.left > 0:
            much = words.rounded_down(ratio.left)
            return f"{much} of the limit is left, gaps and expanded uncertainty counted against it."
        return "Nothing of the limit is left once gaps and expanded uncertainty are counted."
    if ratio.exceeds:
        return "Nothing is left: the limit is exceeded."
    said = [] if ratio.verdict == "conforms" else why(ratio, reasons)
    if ratio.window.lower:
        bound = f"the figure is a lower bound: {', '.join(ratio.window.lower)}"
        said = [bound] if bound not in said else said
    if ratio.u_db is None:
        said = [*said, "the uncertainty is not stated"]
    return f"What is left cannot be said: {'; '.join(said) or 'the limit is not decided'}."


def level_label(ratio: Ratio | None, *, filled: bool) -> str:
    """The words beside the level in the picture."""
    if ratio is None or ratio.stands is None:
        return ""
    what = "taken" if filled else "level"
    if ratio.kind is Kind.OPEN and ratio.window.upper:
        return f"seen: below {words.rounded_up(ratio.stands)}"  # longer words leave the drawing
    return f"{what} {figure(ratio)}"


def line(ratio: Ratio) -> str:
    """What the line of the picture is."""
    return {
        Kind.AT_LEAST: "The line is what is known at the least; the average may be higher.",
        Kind.BELOW: "The line is what the average stays below.",
        Kind.OPEN: "The line is the figure that is known; the average may be higher or lower.",
    }.get(ratio.kind, "The line is the average over the averaging time.")


def space_label(ratio: Ratio | None) -> str:
    """The words in the space above the level of a recess that fills."""
    if ratio is None or ratio.exceeds:
        return ""
    return "not known" if ratio.left is None else f"left {words.rounded_down(ratio.left)}"


def e_words(field: Mapping[str, Any], flags: Sequence[str]) -> str:
    """The field strength of one averaging time, V/m; a bound has U counted."""
    low, mean, high = (bounds.number(field, f"e_{which}") for which in ("low", "mean", "high"))
    window = bounds.window(field, flags)
    kind = window.kind(low, mean)
    if kind is Kind.AT_LEAST and low is not None:
        return f"at least {words.rounded_down(_bottom(field, low))}"
    if kind is Kind.BELOW:
        most = mean if high is None else high
        return words.figure(None) if most is None else f"below {words.rounded_up(most)}"
    if kind is Kind.OPEN and window.upper and high is not None:
        return f"{SEEN} below {words.rounded_up(high)}"
    about = "about " if kind is Kind.OPEN else ""
    return about + words.figure(low if mean is None and kind is not Kind.NONE else mean)


def e_interval(field: Mapping[str, Any], flags: Sequence[str]) -> str:
    """The interval of the field strength with U, V/m; a bound that is said first has it already."""
    low, mean, high = (bounds.number(field, f"e_{which}") for which in ("low", "mean", "high"))
    u_db = bounds.number(field, "u_db")
    kind = bounds.window(field, flags).kind(low, mean)
    if u_db is None or kind in (Kind.NONE, Kind.OPEN):
        return "not stated"
    if kind in (Kind.AT_LEAST, Kind.BELOW):
        return COUNTED
    if mean is None:
        return "not stated"
    added = bounds.number(field, "added_e2") or 0.0
    ends = within(mean**2, mean**2, u_db, added)
    least, most = (words.figure(float(end) ** 0.5) for end in ends)
    return f"{least} to {most} V/m"


def _bottom(field: Mapping[str, Any], low: float) -> float:
    """The lower end with U, V/m, as Ratio.bottom has it for a ratio."""
    u_db, added = (bounds.number(field, key) or 0.0 for key in ("u_db", "added_e2"))
    return math.sqrt(float(within(low**2, low**2, u_db, added).low))


def e_spread(field: Mapping[str, Any], flags: Sequence[str]) -> str:
    """From the lowest to the highest field strength by gaps and band, as far as flags leave it."""
    low, high = (bounds.number(field, f"e_{which}") for which in ("low", "high"))
    window = bounds.window(field, flags)
    low = None if window.upper else low
    high = None if window.lower else high
    if low is not None and high is not None:
        return f"{words.rounded_down(low)} to {words.rounded_up(high)} V/m"
    if low is not None:
        return f"{words.rounded_down(low)} V/m; highest not known"
    if high is not None:
        return f"lowest not known; {words.rounded_up(high)} V/m"
    return "not known"
