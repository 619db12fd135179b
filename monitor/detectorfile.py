"""The [detector] table of a calibration file: counts to power at the detector's port."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from monitor.core import detector as det
from monitor.core.averaging_law import KINDS as AVERAGES
from monitor.core.averaging_law import Averaging, Treatment, corrected, joined, treatment
from monitor.core.budget import Contribution
from monitor.core.calibration import CountTable, FrequencyTable
from monitor.core.distributions import Real
from monitor.core.errors import CalibrationError
from monitor.core.keys import Table
from monitor.core.law import CurveLaw, Law
from monitor.core.quantities import power_ratio_from_db, w_from_dbm
from monitor.detectorkeys import read_source
from monitor.detectorkinds import Noise, Source
from monitor.tomlfile import rows

KINDS = ("log", "rms", "scale", "probe")
MOST_TEMPERATURE_DB = 20.0
"""A detector that drifts further than this is not measuring (our choice)."""


@dataclass(frozen=True, slots=True, eq=False)
class Fit:
    """A detector in one band, at one gain step.

    offset: dB over frequency that the table leaves out, as a loss: the table holds for the middle
    of the band; None where it is the same everywhere. contributions: lines of the budget. added_db:
    what table and noise were corrected by.
    """

    law: Law
    table: CountTable
    contributions: tuple[Contribution, ...]
    offset: FrequencyTable | None
    noise: Noise
    added_db: float = 0.0

    @property
    def least_w(self) -> float:
        """Lower end of the range to be trusted, W."""
        return w_from_dbm(self.law.range_dbm[0] + self.added_db)

    def treated(self, done: Treatment) -> Fit:
        """Corrected for averaged logs: the noise, too, for it was found on uncorrected figures."""
        ratio = power_ratio_from_db(done.correction_db)
        noise = self.noise.in_part() if done.noise_in_part else self.noise
        return replace(
            self,
            table=corrected(self.table, done.correction_db),
            contributions=self.contributions + done.lines,
            noise=Noise(noise.w * ratio, noise.u_w * ratio),
            added_db=done.correction_db,
        )


@dataclass(frozen=True, slots=True, eq=False)
class Detector:
    """What a [detector] table says, before it is known for which band.

    averaging_s: over how long each reading is a mean; 0 where it is none, or where that is unknown.
    temperature: celsius (t,) and dB (t,) by which readings are too high. values: the table as the
    file has it. serial: what its board calls itself (the name in its banner), '' where the file
    does not say.
    """

    where: Table
    axis: str
    kind: str
    averages: str
    averaging_s: float
    source: Source
    temperature: tuple[Real, Real] | None
    values: Mapping[str, Any]
    serial: str = ""

    @property
    def averaging(self) -> Averaging:
        """What it, or the converter behind it, averages before it gives a count."""
        return Averaging(self.averages, self.averaging_s)

    def treatment(self, signal: str, bandwidth_hz: float, front: Averaging) -> Treatment:
        """What holds of its readings of such a signal behind that front end.

        Figures of a true-rms detector or of a probe follow the root of power, and those of averaged
        power hardly vary: no correction is known for their logs.
        """
        holds = joined(self.averaging, front)
        other = self.kind in ("rms", "probe") or self.averages == "power"
        known = "undeclared" if other and signal == "noise" else signal
        return treatment(holds.kind, holds.seconds, known, bandwidth_hz)

    @property
    def resolution(self) -> float | None:
        """What a count stands for; None for converter counts."""
        return self.source.resolution

    def fit(self, gain: str, band: str, low_hz: float, high_hz: float) -> Fit:
        """The detector at a gain step ('': the only one) from low_hz to high_hz (or at one).

        band: its name, for the budget. ConfigError for a gain step or frequencies that it lacks.
        """
        law, offset, noise, key = self.source.fit(self.where, gain, low_hz, high_hz)
        try:
            table = law.table()
            lines = det.rounding(law.half_step_db())
        except CalibrationError as error:
            raise self.where.error(key, str(error)) from None
        half_db = law.half_spread_db() if isinstance(law, CurveLaw) else 0.0
        if half_db > 0.0:
            lines += (
                Contribution(
                    f"detector curve over band {band}", half_db, "rectangular", shared=True,
                    kind="detector",
                ),
            )  # fmt: skip
        return Fit(law, table, lines, offset, noise)


def read_detector(table: Table, valid_temperature_c: tuple[float, float]) -> Detector:
    """Read one [detector] table; ConfigError or CalibrationError of one line."""
    axis = table.text("axis", "", ("x", "y", "z"))
    kind = table.text("kind", choices=KINDS)
    averages = table.text("averages", choices=AVERAGES)
    averaging_s = table.number("averaging_s", 0.0, 0.0, 3600.0)
    if averaging_s and averages == "none":
        raise table.error("averaging_s", "only where averages is log or power; take it out")
    temperature = _temperature(table, valid_temperature_c)
    serial = table.text("serial", "").strip()
    source = read_source(table, kind)
    values = table.values
    table.finish()
    return Detector(table, axis, kind, averages, averaging_s, source, temperature, values, serial)


def _temperature(table: Table, valid_c: tuple[float, float]) -> tuple[Real, Real] | None:
    """By how much readings are too high, over celsius."""
    slope = table.number("temperature_coefficient_db_per_k", None, -1.0, 1.0)
    if table.any("temperature", None) is not None:
        if slope is not None:
            raise table.error("temperature", "give it or a coefficient, not both")
        values = rows(table, "temperature", "[celsius, dB]")
        if (np.diff(values[:, 0]) <= 0).any():
            raise table.error("temperature", "degrees must rise from row to row")
        if np.abs(values[:, 1]).max() > MOST_TEMPERATURE_DB:
            raise table.error("temperature", f"more than {MOST_TEMPERATURE_DB:g} dB; correct it")
        return values[:, 0], values[:, 1]
    if slope is None:
        return None
    reference_c = table.number("reference_c", low=valid_c[0], high=valid_c[1])
    celsius = np.array(valid_c)
    return celsius, slope * (celsius - reference_c)
