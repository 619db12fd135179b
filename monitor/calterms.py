"""Terms of the budget that are never zero in silence: what is assumed until a person writes them.

The half widths are our choice; hardware/CALIBRATION.md gives the reasons.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from monitor.callines import ASSUMED, AXES
from monitor.core.budget import Budget, Contribution

ASSUMED_DB = {
    "out_of_band": 1.0,
    "cross_axis": 0.5,
    "isotropy": 1.0,
    "near_field": 0.5,
    "own_body": 1.5,
    "drift": 0.5,
    "polarisation": 1.5,
}
"""Half width, dB of power, rectangular, of each kind of line that a file may not leave out."""
WORDS = {
    "out_of_band": "response out of band",
    "cross_axis": "cross-axis response",
    "isotropy": "isotropy",
    "near_field": "near field",
    "own_body": "own body (housing)",
    "drift": "drift",
    "polarisation": "polarisation",
}


def is_component(axes: int, polarisation: str, *, isotropic: bool = False) -> bool:
    """Whether a band of so many axes sees a part of the field only. polarisation: of the Band;
    isotropic: its one channel is a probe of the whole field."""
    return axes < len(AXES) and polarisation != "survey" and not isotropic


def needed(axes: int, polarisation: str, *, isotropic: bool = False) -> tuple[str, ...]:
    """The kinds that must stand in the budget of each channel of a band of so many axes.

    Where a survey stands for the axes that are missing, what it leaves open is one of them.
    """
    left_out = set() if axes > 1 else {"cross_axis"}
    if isotropic or axes == len(AXES) or is_component(axes, polarisation):
        left_out.add("polarisation")
    return tuple(kind for kind in ASSUMED_DB if kind not in left_out)


def assumed(lines: Iterable[Contribution], kinds: Sequence[str]) -> tuple[Contribution, ...]:
    """A line for each of the kinds that no line has; a written line of zero is a line."""
    there = {line.kind for line in lines}
    return tuple(
        Contribution(
            f"{WORDS[kind]} {ASSUMED}", ASSUMED_DB[kind], "rectangular", shared=True, kind=kind
        )
        for kind in kinds
        if kind not in there
    )


def assumed_kinds(budget: Budget) -> list[str]:
    """Kinds of the lines that stand in for what nobody wrote, each once, in the budget's order."""
    lines = [line for channel in budget for line in channel]
    return list(dict.fromkeys(line.kind for line in lines if line.name.endswith(ASSUMED)))
