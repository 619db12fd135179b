"""A folder of recordings that may take up so many bytes: the oldest go first."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

from hardware.sigmf_write import PART
from monitor.core.sigmf import DATA, META

_NAME = re.compile(r"(\d{6,})-.+", re.ASCII)
_ENDS = (DATA, META)


@dataclass(frozen=True, slots=True)
class Kept:
    """A recording in the folder: its number, which grows, its name without ending, its bytes."""

    number: int
    name: str
    size: int


def recordings(folder: Path) -> list[Kept]:
    """What is there, the oldest first, half of a pair included; other files are nobody's."""
    sizes: dict[str, int] = {}
    for path in folder.iterdir():
        if path.suffix in _ENDS and _NAME.fullmatch(path.stem):
            sizes[path.stem] = sizes.get(path.stem, 0) + path.stat().st_size
    return sorted(
        (Kept(int(name.partition("-")[0]), name, size) for name, size in sizes.items()),
        key=lambda one: (one.number, one.name),
    )


def next_name(folder: Path, label: str) -> str:
    """Name of the next recording: numbered, since a clock may go wrong, and labelled."""
    there = recordings(folder)
    return f"{there[-1].number + 1 if there else 1:06d}-{label}"


def make_room(folder: Path, budget_bytes: int, coming_bytes: int) -> list[Kept]:
    """Remove the oldest recordings until so many bytes fit in the budget; what was removed.

    Halves that a crash left unfinished go, too, without being told.
    """
    for path in folder.glob(f"*{PART}"):
        if path.with_suffix("").suffix in _ENDS:
            path.unlink(missing_ok=True)
    there = recordings(folder)
    used, gone = sum(one.size for one in there), []
    for one in there:
        if used + coming_bytes <= budget_bytes:
            break
        for end in reversed(_ENDS):  # the metadata first: what has them is whole
            (folder / f"{one.name}{end}").unlink(missing_ok=True)
        used -= one.size
        gone.append(one)
    return gone
