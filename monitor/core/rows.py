"""What the pipeline hands to the record: columns of equal length, one array each.

A row keeps its times in boot nanoseconds; the boot and the derivation are the writer's to add.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741


@dataclass(frozen=True, slots=True)
class BlockRows:
    """Ten-second blocks, one channel each; ordered by (start_ns, channel); empty ones left out.

    energy_w_ns: sum of power (W, at the detector port) times valid time (ns); covered_ns: valid
    time; observed_ns: time really integrated; min_w, max_w: extremes of the readings (W).
    """

    start_ns: I
    channel: I
    energy_w_ns: F
    covered_ns: I
    observed_ns: I
    min_w: F
    max_w: F
    n: I
    flags: I


@dataclass(frozen=True, slots=True)
class WindowRows:
    """Sums over the averaging time that ends at end_ns, one channel each."""

    end_ns: I
    averaging_s: I
    channel: I
    energy_w_ns: F
    covered_ns: I
    observed_ns: I
    max_w: F
    flags: I


@dataclass(frozen=True, slots=True)
class FieldRows:
    """Field of the station (sum over axes), V2/m2; nan where there is no valid part.

    e2_low: gaps as zero; e2_mean: mean of the valid part; e2_high: gaps at the period's maximum;
    e2_max: the largest reading. u_db: expanded uncertainty with coverage factor k of what
    multiplies, dB; added_e2: of what adds (noise, scatter), V2/m2. Below the detection limit e2_low
    is 0; e2_mean and e2_high are the bound that is stated.
    """

    end_ns: I
    averaging_s: I
    e2_low: F
    e2_mean: F
    e2_high: F
    e2_max: F
    u_db: F
    k: F
    valid_share: F
    observed_share: F
    flags: I
    added_e2: F


@dataclass(frozen=True, slots=True)
class ExposureRows:
    """Exposure ratios of one scope over its averaging time; verdict as exposure.Verdict.

    ratio_low: gaps as zero and the band's smallest response; ratio_mean, ratio_high: its largest.
    u_db: expanded uncertainty of the ratio, the response over the band is in low and high;
    added_ratio: that of what adds, as in FieldRows.
    """

    end_ns: I
    scope: I
    ratio_low: F
    ratio_mean: F
    ratio_high: F
    u_db: F
    verdict: I
    added_ratio: F


@dataclass(frozen=True, slots=True)
class Event:
    """Something that happened; body is JSON-ready."""

    boot_ns: int
    kind: str
    name: str
    body: dict[str, object]


def count(rows: BlockRows | WindowRows | FieldRows | ExposureRows) -> int:
    """Number of rows."""
    return int(getattr(rows, fields(rows)[0].name).size)
