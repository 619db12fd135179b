"""From SQL rows to columns: exact, whole numbers as int64, NULL as nan."""

from __future__ import annotations

import sqlite3
from typing import Any, TypeVar, get_type_hints

import numpy as np
from numpy.typing import NDArray

from monitor.core import rows as core

Rows = TypeVar("Rows", core.BlockRows, core.WindowRows, core.FieldRows, core.ExposureRows)
_CHUNK = 50_000


def columns(cursor: sqlite3.Cursor, kinds: str) -> list[NDArray[Any]]:
    """All rows of a query as arrays; kinds: one letter a column, i (int64) or f (float64)."""
    types = [np.int64 if kind == "i" else np.float64 for kind in kinds]
    parts: list[list[NDArray[Any]]] = [[np.empty(0, kind)] for kind in types]
    while chunk := cursor.fetchmany(_CHUNK):
        for part, column, kind in zip(parts, zip(*chunk), types):
            part.append(np.array(column, kind))  # float64 turns None into nan
    return [np.concatenate(part) for part in parts]


def kinds_of(shape: type[Rows]) -> str:
    """The letters for columns() of one of the core's rows."""
    hints = get_type_hints(shape)
    return "".join("f" if hints[name] == core.F else "i" for name in shape.__slots__)
