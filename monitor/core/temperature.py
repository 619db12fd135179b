"""What temperature does to a chain: powers divided by a factor for every tenth of a degree."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.calibration import Chain, temperature_db
from monitor.core.distributions import Real
from monitor.core.readings import MISSING

MOST_DC = 9_999
"""Largest temperature either way, tenths of a degree: four digits are all that a board sends."""
DIGITS = 13
"""Of a factor: far finer than any table, coarser than what machines differ by in powers of ten."""


@dataclass(frozen=True, slots=True, eq=False)
class Correction:
    """By what the power of one channel is to be divided, for every temperature that is told.

    factor: f8 (n,), of first_dc + i tenths of a degree Celsius; its ends hold beyond. A table,
    and no power of ten per reading: one temperature gives the same bits wherever it stands.
    """

    first_dc: int
    factor: Real

    def factors(self, temperature_dc: NDArray[np.int32]) -> Real:
        """Factors (n,) at temperatures (n,); 1 where the temperature is MISSING."""
        last_dc = self.first_dc + self.factor.size - 1
        at = np.clip(temperature_dc, self.first_dc, last_dc) - self.first_dc
        found = self.factor[at]
        found[temperature_dc == MISSING] = 1.0
        return found


def correction_of(table: tuple[Real, Real] | None) -> Correction | None:
    """The factors of (celsius (t,), dB (t,)) by how much the chain reads too high."""
    if table is None:
        return None
    first = _bounded(math.floor(float(table[0][0]) * 10))
    last = max(first, _bounded(math.ceil(float(table[0][-1]) * 10)))
    db = temperature_db(table, np.arange(first, last + 1) / 10)
    factors = [10.0 ** (x / 10) for x in db.tolist()]
    return Correction(first, np.array([float(f"{factor:.{DIGITS}g}") for factor in factors]))


def corrections_of(chain: Chain) -> tuple[Correction | None, ...]:
    """One for each channel; none of a chain that has no temperature tables at all."""
    tables = chain.temperature or (None,) * len(chain.tables)
    # Channels of one detector share its table, and then what is looked up in it.
    made = {id(table): correction_of(table) for table in tables}
    return tuple(made[id(table)] for table in tables)


def _bounded(temperature_dc: int) -> int:
    return min(max(temperature_dc, -MOST_DC), MOST_DC)
