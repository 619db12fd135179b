"""What steps have produced for the record, gathered in lists and stacked once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Any, TypeVar

import numpy as np

from monitor.core.rows import BlockRows, Event, ExposureRows, FieldRows, WindowRows, count

Rows = TypeVar("Rows", BlockRows, WindowRows, FieldRows, ExposureRows)


@dataclass(slots=True)
class Gathered:
    """Rows in the order in which they came about; Gathered of many steps may be joined."""

    blocks: list[BlockRows]
    windows: list[WindowRows]
    fields: list[FieldRows]
    exposures: list[ExposureRows]
    events: list[Event]

    def extend(self, other: Gathered) -> None:
        """Append all that other holds."""
        for field in fields(self):
            getattr(self, field.name).extend(getattr(other, field.name))


def nothing() -> Gathered:
    """An empty gathering."""
    return Gathered([], [], [], [], [])


def stack(rows: Sequence[Rows]) -> Rows | None:
    """One table of many, ordered by time and then by the other keys; None if there is no row."""
    kept = [table for table in rows if count(table)]
    if not kept:
        return None
    kind = type(kept[0])
    names = [field.name for field in fields(kind)]
    columns: dict[str, Any] = {
        name: np.concatenate([getattr(table, name) for table in kept]) for name in names
    }
    minor = ("channel", "averaging_s", "scope")
    keys: list[Any] = [columns[name] for name in minor if name in columns]
    order = np.lexsort([*keys, columns[names[0]]])
    return kind(**{name: column[order] for name, column in columns.items()})
