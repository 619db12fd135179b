"""The detector's model against its own calibration file, worked by hand."""

from __future__ import annotations

import numpy as np
import pytest

from simulators import detector, scenario

BOARD = detector.load()


def test_chain_at_a_knot_and_between() -> None:
    """900 MHz: antenna 44.6 dB/m; cable 0.55 to 0.80 dB over one octave from 600 MHz, attenuator
    9.95 to 10.10 dB over 600 to 3000 MHz, both linear in dB over log frequency."""
    step = np.log(900 / 600)
    expected = 44.6 + 0.55 + 0.25 * step / np.log(2) + 9.95 + 0.15 * step / np.log(5)
    assert BOARD.chain_db(np.array([900e6]))[0] == pytest.approx(expected, abs=1e-12)
    assert BOARD.k(np.array([900e6]))[0] == pytest.approx(50 * 10 ** (expected / 10))


def test_middle_and_spread_bound_the_chain() -> None:
    low, high = 7e8, 2.7e9
    k = BOARD.k(np.geomspace(low, high, 4001)[1:-1])
    half = 10 ** (BOARD.spread_db(low, high) / 10)
    middle = BOARD.k_mid(low, high)
    assert k.max() == pytest.approx(middle * half, rel=1e-3)
    assert k.min() == pytest.approx(middle / half, rel=1e-3)


def test_a_frequency_outside_the_tables_is_refused() -> None:
    with pytest.raises(ValueError, match="outside"):
        BOARD.k(np.array([5e9]))


def test_powers_of_several_sources_add_on_each_axis() -> None:
    truth = scenario.truth("busy-day", 1, 0.0, 50, 1.0)
    power_w = detector.port_power_w(truth, BOARD)
    k = BOARD.k(truth.frequencies_hz)
    by_hand = sum(truth.e2_by_source[:, [i]] * truth.shares[i] / k[i] for i in range(len(k)))
    assert power_w == pytest.approx(by_hand)
    assert detector.port_power_w(truth, BOARD, 1) == pytest.approx(power_w[:, :1])


def test_counts_are_those_of_the_curve() -> None:
    """-30 dBm gives 1.348 V, 0.6 mV to the count: 2246.67; noise of 0.4 mV is 0.67 counts."""
    power_w = np.full((4000, 3), 1e-6)
    counts = detector.counts(power_w, BOARD, seed=1)
    assert counts.mean() == pytest.approx(1.348 / 0.0006, abs=5 * 0.75 / np.sqrt(12_000))
    assert counts.std() == pytest.approx(np.hypot(0.4 / 0.6, 1 / np.sqrt(12)), rel=0.05)
    assert counts.dtype == np.int32


def test_an_error_of_one_decibel_moves_the_reading_by_one() -> None:
    power_w = np.full((4000, 2), 10 ** (-2.5 - 3))  # between the points at -30 and -20 dBm
    counts = detector.counts(power_w, BOARD, seed=1, errors_db=np.array([0.0, 1.0]))
    slope = (1.348 - 1.128) / 10 / 0.0006
    assert counts[:, 0].mean() - counts[:, 1].mean() == pytest.approx(slope, abs=0.1)


def test_noise_does_not_depend_on_the_cut() -> None:
    power_w = detector.port_power_w(scenario.truth("busy-day", 1, 0.0, 5000, 1.0), BOARD)
    whole = detector.counts(power_w, BOARD, seed=4, first_index=100)
    parts = [
        detector.counts(power_w[a:b], BOARD, seed=4, first_index=100 + a)
        for a, b in ((0, 1), (1, 3500), (3500, 5000))
    ]
    assert np.array_equal(np.concatenate(parts), whole)


def test_beyond_the_curve_the_output_stands_still() -> None:
    quiet = BOARD.__class__(**{**vars(BOARD), "noise_v": 0.0})
    counts = detector.counts(np.array([[0.0, 1e-12, 1.0, 1e3]]), quiet, seed=1)[0]
    assert counts.tolist() == [round(2.010 / 0.0006)] * 2 + [round(0.486 / 0.0006)] * 2


def test_a_finer_converter_keeps_the_volts() -> None:
    finer = detector.with_converter(BOARD, 16, BOARD.volts_per_count / 16)
    power_w = np.full((2000, 1), 1e-6)
    coarse_v = detector.counts(power_w, BOARD, seed=1).mean() * BOARD.volts_per_count
    assert detector.counts(power_w, finer, seed=1).mean() * finer.volts_per_count == pytest.approx(
        coarse_v, abs=5e-5
    )
