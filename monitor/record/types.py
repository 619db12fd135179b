"""What goes into the record and what comes out of it. Times: ns, boot time or UTC as named."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from monitor.core.readings import Batch
from monitor.core.rows import BlockRows, Event, ExposureRows, FieldRows, WindowRows
from monitor.record.coverage import Coverage

if TYPE_CHECKING:
    from monitor.core.limits import Scope

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741

WINDOW_EVERY_NS = 60_000_000_000
"""Windows are kept once a minute; two rows further apart have a gap between them."""

BOOT_KINDS = ("machine", "series", "rehearsal")


@dataclass(frozen=True, slots=True)
class ClockFix:
    """At boot_ns the UTC was utc_ns (ns since 1970), give or take uncertainty_ns."""

    boot_ns: int
    utc_ns: int
    source: str
    uncertainty_ns: int


@dataclass(frozen=True, slots=True)
class Commit:
    """What the record takes in one transaction: all of it or nothing.

    temperature_c (board) and calibration (identity of the chain) belong to the blocks.
    """

    raw: Batch | None = None
    blocks: BlockRows | None = None
    windows: WindowRows | None = None
    fields: FieldRows | None = None
    exposures: ExposureRows | None = None
    events: tuple[Event, ...] = ()
    clock_fixes: tuple[ClockFix, ...] = ()
    temperature_c: float | None = None
    calibration: str = ""


@dataclass(frozen=True, slots=True)
class Boot:
    """A run of one boot clock. kind: machine, series or rehearsal.

    utc_offset_ns: UTC minus boot time by the boot's best clock fix; None before the first fix.
    """

    boot: int
    boot_id: str
    kind: str
    utc_offset_ns: int | None
    uncertainty_ns: int | None


@dataclass(frozen=True, slots=True)
class ChannelRow:
    """A channel of the record; index is its column in the raw counts."""

    index: int
    name: str
    axis: str
    band: str


@dataclass(frozen=True, slots=True)
class EventRow:
    """An event as kept; utc_ns is None while its boot has no clock fix."""

    utc_ns: int | None
    boot: int
    boot_ns: int
    kind: str
    name: str
    body: dict[str, object]


@dataclass(frozen=True, slots=True)
class LatestField:
    """The newest window of one averaging time; e in V/m rms, nan where there is no valid part."""

    averaging_s: int
    e_low: float
    e_mean: float
    e_high: float
    e_max: float
    u_db: float
    k: float
    valid_share: float
    observed_share: float
    flags: int
    added_e2: float


@dataclass(frozen=True, slots=True)
class LatestExposure:
    """The newest exposure ratios of one scope; index as in Record.scopes(), verdict as stored."""

    index: int
    scope: Scope
    ratio_low: float
    ratio_mean: float
    ratio_high: float
    u_db: float
    verdict: int
    added_ratio: float


@dataclass(frozen=True, slots=True)
class Latest:
    """The newest windows in the record, and when they ended."""

    boot: int
    kind: str
    end_ns: int
    utc_ns: int | None
    last_reading_ns: int | None
    last_reading_utc_ns: int | None
    fields: tuple[LatestField, ...]
    exposures: tuple[LatestExposure, ...]
    flags: int


@dataclass(frozen=True, slots=True)
class History:
    """Averages over a span of UTC, one array each of shape (n,), ordered by utc_ns.

    utc_ns: window ends. e_*: V/m rms, nan where nothing is valid. ratios: scope index to
    (low, mean, high) of shape (n,). gaps: [(start, end)] in UTC ns in which no minute has a valid
    reading, whatever the averaging time (a window that reaches into one has a valid_share below
    1); the longest coverage.MOST_GAPS of them. bin_ns: 0 where each point is one window, else the
    width of the bins that the points were reduced to: then e_low, valid_share and the low ratio
    are the smallest in the bin, all else the largest, and flags are those of any window in it.
    u_db: expanded uncertainty of the mean with all that adds; nan below the detection limit.
    widened_by_drift_db: the drift of the calibration, found later, that is in u_db; 0 where none.
    base_u_db, added_e2: expanded uncertainty of what multiplies and of what adds to E squared, for
    the ends of an interval; ratio_u: the same two of each scope's ratio, nan where each point is an
    hour or a day.
    measured_share: of the span up to the last sign of life in the record; coverage answers the
    same for any part of the span.
    """

    averaging_s: int
    utc_ns: I
    e_low: F
    e_mean: F
    e_high: F
    e_max: F
    valid_share: F
    u_db: F
    flags: I
    ratios: Mapping[int, tuple[F, F, F]]
    gaps: list[tuple[int, int]]
    bin_ns: int
    measured_share: float = math.nan
    coverage: Coverage = field(default_factory=Coverage)
    widened_by_drift_db: F = field(default_factory=lambda: np.empty(0))
    base_u_db: F = field(default_factory=lambda: np.empty(0))
    added_e2: F = field(default_factory=lambda: np.empty(0))
    ratio_u: Mapping[int, tuple[F, F]] = field(default_factory=dict)
