"""Our budgets beside general libraries for uncertainty: GTC, uncertainties, and scipy's draws.

They are told what a budget says and never see our functions: each error is an object of theirs, a
shared one and the same object in every channel.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import GTC
import numpy as np
import pytest
import uncertainties
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from uncertainties import umath

from monitor import calparts, calreview
from monitor.core.budget import (
    Contribution,
    combined,
    effective_degrees,
    independent,
    linear,
    standard,
    table,
)
from tests.core.test_budget import GAUGE

ROOT = Path(__file__).parents[2]
SHIPPED = sorted((ROOT / "hardware/examples").glob("*-calibration.toml")) + sorted(
    (ROOT / "simulators/data").glob("*-calibration.toml")
)
EXACT = 1e-9
ENDLESS = 1e6
"""Degrees of freedom that are as good as without end."""
GTC_HALF_WIDTH = {
    "rectangular": GTC.type_b.uniform,
    "triangular": GTC.type_b.triangular,
    "u_shaped": GTC.type_b.arcsine,
}


def alone(line: Contribution) -> float:
    """Standard uncertainty of a line's error, divisors from GTC's own functions."""
    if line.distribution == "expanded":
        return line.value / line.k
    if line.distribution == "normal":
        return line.value
    return float(GTC_HALF_WIDTH[line.distribution](line.value))


@dataclass(frozen=True)
class Case:
    """A budget of several channels, and the share of each."""

    budget: list[list[Contribution]]
    shares: np.ndarray

    def flat(self) -> list[tuple[int, Contribution]]:
        """Channel and line."""
        return [(c, line) for c, lines in enumerate(self.budget) for line in lines]


def _key(channel: int, line: Contribution) -> tuple[str, int]:
    """One error of its own, or the one of all channels."""
    return line.name, -1 if line.shared else channel


@st.composite
def cases(draw: st.DrawFn) -> Case:
    """One to three channels; names unique but for what is shared."""
    channels = draw(st.integers(1, 3))
    budget: list[list[Contribution]] = [[] for _ in range(channels)]
    for i in range(draw(st.integers(1, 7))):
        distribution = draw(st.sampled_from([*GTC_HALF_WIDTH, "normal", "expanded"]))
        degrees = draw(st.one_of(st.just(math.inf), st.floats(1.0, 300.0)))
        shared = draw(st.booleans())
        for lines in budget:
            value, by = draw(st.floats(0.01, 3.0)), draw(st.floats(0.1, 5.0))
            sign = draw(st.sampled_from([-1.0, 1.0]))
            k = draw(st.floats(1.0, 3.0))
            lines.append(
                Contribution(f"error {i}", value, distribution, k, shared, "", degrees, sign * by)
            )
    weights = [draw(st.floats(0.05, 1.0)) for _ in range(channels)]
    return Case(budget, np.array(weights) / sum(weights))


@settings(max_examples=150, deadline=None)
@given(cases())
def test_linear_budgets_beside_gtc(case: Case) -> None:
    """u, effective degrees of freedom and each line's part, to 1e-9."""
    errors: dict[tuple[str, int], object] = {}
    whole = GTC.ureal(0.0, 0.0)
    for channel, line in case.flat():
        error = errors.setdefault(
            _key(channel, line), GTC.ureal(0.0, 1.0, df=line.degrees_of_freedom)
        )
        whole += float(case.shares[channel]) * line.sensitivity * alone(line) * error
    ours = [error.at(case.shares) for error in independent(case.budget)]
    assert standard(ours) == pytest.approx(GTC.uncertainty(whole), rel=EXACT, abs=1e-12)
    if standard(ours) > 1e-6:  # what cancels but for rounding has no degrees of freedom
        found = effective_degrees(ours)
        if found < ENDLESS:
            assert found == pytest.approx(GTC.dof(whole), rel=EXACT)
        else:
            assert GTC.dof(whole) > ENDLESS * (1.0 - EXACT)
    parts = {key: abs(GTC.component(whole, error)) for key, error in errors.items()}
    _same_parts(case, parts)


@settings(max_examples=100, deadline=None)
@given(cases())
def test_linear_budgets_beside_uncertainties(case: Case) -> None:
    """u of 10 log of the sum of powers, differentiated by the library, and each line's part.

    So this holds for the model itself: errors in dB of each channel, powers that add.
    """
    errors: dict[tuple[str, int], object] = {}
    in_db: list[object] = [0.0] * len(case.budget)
    for channel, line in case.flat():
        error = errors.setdefault(_key(channel, line), uncertainties.ufloat(0.0, 1.0))
        in_db[channel] = in_db[channel] + line.sensitivity * alone(line) * error
    power = sum(float(share) * 10.0 ** (db / 10.0) for share, db in zip(case.shares, in_db))
    whole = 10.0 * umath.log10(power)
    ours = standard([error.at(case.shares) for error in independent(case.budget)])
    assert ours == pytest.approx(whole.std_dev, rel=EXACT, abs=1e-12)
    found = whole.error_components()
    _same_parts(case, {key: found.get(error, 0.0) for key, error in errors.items()})


def _same_parts(case: Case, parts: Mapping[tuple[str, int], float]) -> None:
    """The contribution table beside the library's components, name by name."""
    rows = table(case.budget, case.shares)
    for name in {name for name, _ in parts}:
        ours = math.hypot(*(row.u for row in rows if row.name == name))
        theirs = math.hypot(*(part for (other, _), part in parts.items() if other == name))
        assert ours == pytest.approx(theirs, rel=EXACT, abs=1e-12)


def test_end_gauge_of_gum_h_1_beside_gtc() -> None:
    """JCGM 100:2008, H.1, as its model l = ls + d - ls (da th + as dth), differentiated by GTC."""
    standard_nm = GTC.ureal(50_000_623.0, 25.0, df=18)
    repeated, random = GTC.ureal(215.0, 5.8, df=24), GTC.ureal(0.0, 3.9, df=5)
    systematic = GTC.ureal(0.0, 6.7, df=8)
    expansion = GTC.ureal(11.5e-6, GTC.type_b.uniform(2e-6))
    room_k, cyclic_k = GTC.ureal(-0.1, 0.2), GTC.ureal(0.0, GTC.type_b.arcsine(0.5))
    apart = GTC.ureal(0.0, GTC.type_b.uniform(1e-6), df=50)
    apart_k = GTC.ureal(0.0, GTC.type_b.uniform(0.05), df=2)
    inputs = [
        standard_nm, repeated, random, systematic, expansion, room_k, cyclic_k, apart, apart_k,
    ]  # fmt: skip
    difference = repeated + random + systematic
    length = (
        standard_nm + difference - standard_nm * (apart * (room_k + cyclic_k) + expansion * apart_k)
    )
    ours = linear(GAUGE)
    assert ours.u == pytest.approx(GTC.uncertainty(length), rel=EXACT)
    assert ours.degrees_of_freedom == pytest.approx(GTC.dof(length), rel=EXACT)
    theirs = [abs(GTC.component(length, each)) for each in inputs]
    rows = [row.u for row in table([GAUGE], np.ones(1))]
    assert rows == pytest.approx(theirs, rel=EXACT, abs=1e-12)


VOLTS = [5.007, 4.994, 5.005, 4.990, 4.999]
AMPERES = [19.663e-3, 19.639e-3, 19.640e-3, 19.685e-3, 19.678e-3]
PHASE = [1.0456, 1.0438, 1.0468, 1.0428, 1.0433]


def test_impedance_of_gum_h_2_beside_two_libraries() -> None:
    """JCGM 100:2008, H.2: three means in correlation; R, X and Z by GTC and by uncertainties."""
    v, i, phi = GTC.type_a.multi_estimate_real([VOLTS, AMPERES, PHASE])
    z = v / i
    gtc = {"R": z * GTC.cos(phi), "X": z * GTC.sin(phi), "Z": z}
    sets = np.array([VOLTS, AMPERES, PHASE])
    covariance = np.cov(sets) / len(VOLTS)
    v, i, phi = uncertainties.correlated_values(sets.mean(axis=1), covariance)
    z = v / i
    other = {"R": z * umath.cos(phi), "X": z * umath.sin(phi), "Z": z}
    budget = [
        [
            Contribution(f"set {k}", 1.0, "normal", shared=True, sensitivity=float(off))
            for k, off in enumerate((each - each.mean()) / math.sqrt(20.0))
        ]
        for each in sets
    ]
    for name, result in other.items():
        ours = combined(budget, np.array(_partials(name, *sets.mean(axis=1)))).u
        assert ours == pytest.approx(GTC.uncertainty(gtc[name]), rel=EXACT)
        assert ours == pytest.approx(result.std_dev, rel=1e-7)  # its root of a matrix rounds


def _partials(name: str, v: float, i: float, phi: float) -> list[float]:
    """By hand: R = V/I cos, X = V/I sin, Z = V/I."""
    z = v / i
    r, x = z * math.cos(phi), z * math.sin(phi)
    return {"R": [r / v, -r / i, -x], "X": [x / v, -x / i, r], "Z": [z / v, -z / i, 0.0]}[name]


def test_attenuator_of_30_db_beside_two_libraries() -> None:
    """EA-4/02 M, S7: nine standard uncertainties, together 0.0224 dB."""
    parts = [0.0091, 0.0025, 0.0014, 0.02, 0.0021, 0.0003, 0.0003, 0.002, 0.002]
    ours = linear([Contribution(str(n), u, "normal") for n, u in enumerate(parts)]).u
    assert ours == pytest.approx(GTC.uncertainty(sum(GTC.ureal(0, u) for u in parts)), rel=EXACT)
    assert ours == pytest.approx(sum(uncertainties.ufloat(0, u) for u in parts).std_dev, rel=EXACT)
    assert ours == pytest.approx(0.0224, abs=5e-5)


def scipys(line: Contribution, size: int, rng: np.random.Generator) -> np.ndarray:
    """Errors of a line by scipy's distributions, half widths by the definition of each."""
    value, v = line.value, line.degrees_of_freedom
    known = {
        "normal": lambda: stats.norm(scale=value),
        "expanded": lambda: stats.norm(scale=value / line.k),
        "rectangular": lambda: stats.uniform(-value, 2.0 * value),
        "triangular": lambda: stats.triang(0.5, -value, 2.0 * value),
        "u_shaped": lambda: stats.arcsine(-value, 2.0 * value),
    }
    drawn = known[line.distribution]().rvs(size, random_state=rng)
    if math.isfinite(v):
        drawn = drawn / np.sqrt(stats.chi2(v).rvs(size, random_state=rng) / v)
    return np.asarray(line.sensitivity * drawn)


def drawn_expanded_db(
    budget: Sequence[Sequence[Contribution]], shares: np.ndarray, size: int, seed: int
) -> float:
    """95 % of errors in dB of a sum of powers lie within it; scipy's draws, added here."""
    rng = np.random.default_rng(seed)
    units: dict[tuple[str, int], np.ndarray] = {}
    power = np.zeros(size)
    for channel, lines in enumerate(budget):
        in_db = np.zeros(size)
        for line in lines:
            if line.value == 0.0:
                continue
            key = _key(channel, line)
            if key not in units:
                units[key] = scipys(line, size, rng) / (alone(line) * line.sensitivity)
            in_db += units[key] * (alone(line) * line.sensitivity)
        power += shares[channel] * 10.0 ** (in_db / 10.0)
    return float(np.quantile(np.abs(10.0 * np.log10(power)), 0.95))


@pytest.mark.parametrize("path", SHIPPED, ids=lambda path: path.stem)
@pytest.mark.parametrize("unequal", [False, True])
def test_scipys_draws_agree_for_every_shipped_calibration(path: Path, unequal: bool) -> None:
    """Within 2 % of U, three axes with equal shares and with most of the power on one."""
    budget = calreview.view(calparts.read(path), "xyz", None).chain.contributions
    shares = np.array([0.7, 0.2, 0.1]) if unequal else np.full(3, 1.0 / 3.0)
    ours = combined(budget, shares)
    drawn = drawn_expanded_db(budget, shares, 400_000, 21)
    assert ours.k * ours.u == pytest.approx(drawn, rel=0.02)
