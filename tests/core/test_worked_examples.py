"""Figures that others have worked and printed, by the functions of the product.

One row of worked_examples.csv is one figure with its source; what says which function it is of.
Further ones stand beside what they are about: test_budget, test_distributions, test_uncertainty,
test_montecarlo, test_averaging_law, test_antenna_factor.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from scipy import integrate, stats

from monitor.core.budget import Contribution, combined, factors, linear
from monitor.core.conformity import conformance, multiplier
from monitor.core.distributions import draw
from monitor.core.mismatch import Mismatch
from monitor.core.quantities import (
    PORT_OHM,
    Z0_OHM,
    db_from_power_ratio,
    e_from_s,
    power_ratio_from_db,
    s_from_e,
    w_from_dbm,
)
from monitor.core.spectrum import BandAccumulator

ROWS = list(csv.DictReader((Path(__file__).parent / "worked_examples.csv").open(encoding="utf-8")))
ROUND = Z0_OHM / 377.0
"""Sources that take 377 ohm differ from the exact impedance by this factor in S."""
DRAWS = 2_000_000


def normals(*u: float) -> list[Contribution]:
    """Normal lines of these standard uncertainties."""
    return [Contribution(str(i), each, "normal") for i, each in enumerate(u)]


def effective_degrees(*pairs: float) -> float:
    """u and degrees of freedom in turn."""
    lines = [
        Contribution(str(u), u, "normal", degrees_of_freedom=v)
        for u, v in zip(pairs[::2], pairs[1::2])
    ]
    return linear(lines).degrees_of_freedom


def logarithm(low: float, high: float) -> float:
    """y = ln x with x rectangular, by the sensitivity at the middle."""
    middle = (low + high) / 2.0
    line = Contribution("x", (high - low) / 2.0, "rectangular", sensitivity=1.0 / middle)
    return linear([line]).u


def drawn_logarithm(low: float, high: float) -> float:
    """The same by drawing: the spread of ln x itself."""
    unit = draw("rectangular", DRAWS, math.inf, np.random.default_rng(1))
    x = (low + high) / 2.0 + (high - low) / 2.0 / math.sqrt(3.0) * unit
    return float(np.log(x).std())


def expansion(l0: float, u_l0: float, t0: float, u_t0: float, *second: float) -> float:
    """u of (L1 - L0) / (L0 (T1 - T0)) by its partial derivatives."""
    l1, u_l1, t1, u_t1 = second
    y = (l1 - l0) / (l0 * (t1 - t0))
    parts = {
        "L0": (u_l0, -l1 / (l0**2 * (t1 - t0))),
        "L1": (u_l1, 1.0 / (l0 * (t1 - t0))),
        "T0": (u_t0, y / (t1 - t0)),
        "T1": (u_t1, -y / (t1 - t0)),
    }
    return linear(
        [Contribution(name, u, "normal", sensitivity=by) for name, (u, by) in parts.items()]
    ).u


def drawn_magnitude(real: float, imaginary: float, u: float) -> float:
    """Spread of the magnitude of a complex figure, both parts normal."""
    rng = np.random.default_rng(2)
    parts = [at + u * draw("normal", DRAWS, math.inf, rng) for at in (real, imaginary)]
    return float(np.hypot(*parts).std())


def tone_share(offset_bins: float) -> float:
    """Power of a tone of amplitude 1 in the one bin beside it."""
    n, at = 256, 40
    tone = np.exp(2j * math.pi * (at + offset_bins) * np.arange(n) / n).astype(np.complex64)
    sums = BandAccumulator(float(n), [(at - 0.5, at + 0.5)], fft=n, overlap=0.0)
    sums.add(tone)
    return float(sums.result().power[0])


def risk(process: float, u: float, limit: float, accept: float, *, falsely: str) -> float:
    """Both-sided risk over a process that is centred (JCGM 106, 9.5): integral of ours."""

    def density(at: float) -> float:
        return float(stats.norm.pdf(at, scale=process)) * conformance(at, u, -accept, accept)

    if falsely == "accepted":
        return 2.0 * integrate.quad(density, limit, limit + 12.0 * u, epsabs=1e-13)[0]
    within = 2.0 * integrate.quad(density, 0.0, limit, epsabs=1e-13)[0]
    return conformance(0.0, process, -limit, limit) - within


def at_4_to_1(in_tolerance: float) -> float:
    """Percent falsely accepted where the process is four times as wide as the measurement."""
    process = 1.0 / multiplier((1.0 + in_tolerance) / 2.0)
    return 100.0 * risk(process, process / 4.0, 1.0, 1.0, falsely="accepted")


def surely_faster(limit: float, relative_u: float, probability: float) -> float:
    """Indicated speed above which the true one is above the limit with that probability.

    u grows with the indication, so that v = limit + z relative_u v.
    """
    v = limit / (1.0 - multiplier(probability) * relative_u)
    assert conformance(v, relative_u * v, low=limit) == pytest.approx(probability)
    return v


WHAT: dict[str, Callable[..., float]] = {
    "s of e": s_from_e,
    "s of e over 377 ohm": lambda e: s_from_e(e) * ROUND,
    "s of e over 377 ohm in db": lambda e: db_from_power_ratio(s_from_e(e) * ROUND),
    "s of h over 377 ohm": lambda h: s_from_e(377.0 * h) * ROUND,
    "dbuv/m less db(mw/m2) over 377 ohm": lambda: (
        120.0 + db_from_power_ratio(e_from_s(1e-3 / ROUND) ** 2)
    ),
    "dbuv/m less dbua/m": lambda: 2.0 * db_from_power_ratio(1.0 / s_from_e(1.0)),
    "dbua less dbm": lambda: 120.0 + db_from_power_ratio(w_from_dbm(0.0) / PORT_OHM),
    "e of s": e_from_s,
    "e of s in dbuv/m": lambda s: 120.0 + db_from_power_ratio(e_from_s(s) ** 2),
    "rise of two equal powers": lambda: db_from_power_ratio(
        2.0 * w_from_dbm(0.0) / w_from_dbm(0.0)
    ),
    "noise taken off": lambda snr_db: -db_from_power_ratio(1.0 - power_ratio_from_db(-snr_db)),
    "power ratio": power_ratio_from_db,
    "db of percent of power": lambda percent: db_from_power_ratio(1.0 + percent / 100.0),
    "percent of field per db": lambda: 100.0 * (factors(1e-6).e_high - 1.0) / 1e-6,
    "mismatch upper db by vswr": lambda *vswr: Mismatch.of_vswr(*vswr).limits_db[1],
    "mismatch lower db by vswr": lambda *vswr: Mismatch.of_vswr(*vswr).limits_db[0],
    "mismatch upper percent by vswr": lambda *vswr: Mismatch.of_vswr(*vswr).limits_percent[1],
    "mismatch standard of voltage": lambda *rho: (
        linear([Contribution("voltage", Mismatch(*rho).voltage, "u_shaped")]).u
    ),
    "mismatch standard percent": lambda *rho: Mismatch(*rho).standard_percent,
    "mismatch worst of power": lambda *rho: Mismatch(*rho).limits_percent[1] / 100.0,
    "root of sum of squares": lambda *u: linear(normals(*u)).u,
    "effective degrees": effective_degrees,
    "u of ln x to first order": logarithm,
    "u of ln x by drawing": drawn_logarithm,
    "u of expansion": expansion,
    "deviation of magnitude by drawing": drawn_magnitude,
    "hann noise bandwidth": lambda: 1.0 / tone_share(0.0),
    "hann scalloping": lambda bins: db_from_power_ratio(tone_share(bins) / tone_share(0.0)),
    "p within": conformance,
    "p below limit": lambda value, u, limit: conformance(value, u, high=limit),
    "guard multiplier": multiplier,
    "surely faster": surely_faster,
    "global consumer's risk": lambda *given: risk(*given, falsely="accepted"),
    "global producer's risk": lambda *given: risk(*given, falsely="rejected"),
    "percent falsely accepted at 4 to 1": at_4_to_1,
}


@pytest.mark.parametrize(
    "row", ROWS, ids=[f"{i}: {row['what']}".replace("/", " per ") for i, row in enumerate(ROWS, 2)]
)
def test_a_printed_figure_comes_out(row: dict[str, str]) -> None:
    given = [float(part) for part in row["given"].split()]
    found = WHAT[row["what"]](*given)
    assert found == pytest.approx(float(row["expected"]), rel=0.0, abs=float(row["tolerance"]))


def test_every_row_names_its_source_and_every_function_has_a_row() -> None:
    assert all(row["source"].strip() and row["unit"].strip() for row in ROWS)
    assert {row["what"] for row in ROWS} == set(WHAT)


def test_impedance_of_three_readings_in_correlation() -> None:
    """JCGM 100:2008, H.2, table H.4: R 127.732 (0.071), X 219.847 (0.295), Z 254.260 (0.236) ohm.

    Five sets of volts, milliamperes and phase, read together: each set is one error that the three
    means share, its effect on a mean the set's deviation over the root of n (n - 1). Unrounded u(X)
    is 0.2956 ohm; the printed one was worked from rounded correlations.
    """
    volts = np.array([5.007, 4.994, 5.005, 4.990, 4.999])
    amperes = np.array([19.663, 19.639, 19.640, 19.685, 19.678]) * 1e-3
    phase = np.array([1.0456, 1.0438, 1.0468, 1.0428, 1.0433])
    means = [float(each.mean()) for each in (volts, amperes, phase)]
    budget = [
        [
            Contribution(f"set {k}", 1.0, "normal", shared=True, sensitivity=float(off))
            for k, off in enumerate((each - each.mean()) / math.sqrt(20.0))
        ]
        for each in (volts, amperes, phase)
    ]
    v, i, phi = means
    z = v / i
    r, x = z * math.cos(phi), z * math.sin(phi)
    assert [r, x, z] == pytest.approx([127.732, 219.847, 254.260], abs=5e-4)
    partial = {"R": (r / v, -r / i, -x), "X": (x / v, -x / i, r), "Z": (z / v, -z / i, 0.0)}
    for name, u in (("R", 0.071), ("X", 0.295), ("Z", 0.236)):
        found = combined(budget, np.array(partial[name])).u
        assert found == pytest.approx(u, abs=1e-3), name
