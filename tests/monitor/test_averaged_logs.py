"""Averaged logs from the files to the verdict, against levels whose mean is known."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from monitor import calparts, signalwords
from monitor.calfile import chain
from monitor.checks import findings
from monitor.config import Band, Channel, load_site
from monitor.core import gather, pipeline
from monitor.core.averaging_law import UNDECLARED, Averaging
from monitor.core.calibration import Chain
from monitor.core.errors import CalibrationError
from monitor.core.exposure import Verdict
from monitor.core.flags import Flag
from monitor.core.readings import NS_PER_S, Batch
from monitor.core.station import station
from monitor.wiring import averaging_of, chain_for, sensor_settings
from tests.core.stations import SCOPES
from tests.terms import confirmed

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
FILE = """
[calibration]
id = "receiver 3"
date = 2026-01-15
due = 2099-01-15
laboratory = "none"
certificate = "none"
valid_temperature_c = [-10, 50]

[detector]
kind = "scale"
resolution = 0.001
range_dbm = [-90, 10]
{averages}

[[element]]
type = "antenna"
serial = "a1"
certificate = "none"
table = [["700MHz", 30.0], ["3GHz", 30.0]]

[[contribution]]
name = "antenna"
value = 1.0
distribution = "expanded"
k = 2
shared = true
""" + confirmed()
LOG = 'averages = "log"\naveraging_s = 1e-3'
NOISE = Band("main", 8e8, 2e9, "filter", "noise", 5e6)
LINE = "log-average correction, how noise-like"
NOW_NS = 1_790_000_000_000_000_000
"""In September 2026."""
VALUES = 200
"""Independent logs in one reading."""


def made(
    band: Band = NOISE, averages: str = LOG, front: Averaging = UNDECLARED, axes: str = "xyz"
) -> Chain:
    """The chain of three axes, or fewer, in one band."""
    file = calparts.parse(FILE.format(averages=averages).encode())
    return chain(file, [Channel(a, a, "main") for a in axes], {"main": band}, front)


def powers_w(here: Chain) -> list[float]:
    """What a count of -30 dBm stands for, channel by channel."""
    return [float(t.convert(np.array([-30_000], np.int32))[0][0]) for t in here.tables]


def test_noise_is_corrected_in_the_tables_and_in_the_budget() -> None:
    plain, here = made(averages='averages = "none"'), made()
    assert here.flags == int(Flag.CORRECTED_LOG)
    for was, now in zip(powers_w(plain), powers_w(here)):
        assert 10 * math.log10(now / was) == pytest.approx(2.50682, abs=1e-5)
    np.testing.assert_allclose(here.least_w / plain.least_w, 10**0.250682, rtol=1e-5)
    for lines in here.contributions:
        (line,) = [line for line in lines if line.name == LINE]
        assert line.u == pytest.approx(0.3 / math.sqrt(3))
    assert not any(line.name == LINE for lines in plain.contributions for line in lines)
    assert (plain.integration_s, here.integration_s) == (0.0, 1e-3)


@pytest.mark.parametrize("signal", ["bursts", "mixed", "undeclared"])
def test_what_is_not_noise_like_is_a_lower_bound(signal: str) -> None:
    here = made(replace(NOISE, signal=signal))
    assert here.flags == int(Flag.LOG_AVERAGED)
    assert powers_w(here) == pytest.approx([1e-6] * 3)
    assert here.integration_s == 0.0


def test_a_carrier_stays_as_it_is() -> None:
    here = made(replace(NOISE, signal="carrier"))
    assert here.flags == 0
    assert powers_w(here) == pytest.approx([1e-6] * 3)
    assert all("envelope of the carrier" in {x.name for x in line} for line in here.contributions)


def test_one_channel_that_is_a_lower_bound_makes_the_station_one() -> None:
    file = calparts.parse(FILE.format(averages=LOG).encode())
    bands = {"main": NOISE, "up": Band("up", 2.1e9, 2.2e9, signal="bursts")}
    channels = [Channel(a + b, a, b) for b in bands for a in "xyz"]
    here = chain(file, channels, bands)
    assert here.flags == int(Flag.CORRECTED_LOG | Flag.LOG_AVERAGED)
    assert powers_w(here)[0] > 1.7 * powers_w(here)[5]


@pytest.mark.parametrize(
    ("averages", "front", "flags", "seconds"),
    [
        ('averages = "none"', Averaging("log", 1e-3), Flag.CORRECTED_LOG, 1e-3),
        ('averages = "none"', Averaging("log"), Flag.LOG_AVERAGED, 0.0),
        (LOG, Averaging("power", 60.0), Flag.CORRECTED_LOG, 1e-3),
        ('averages = "power"', Averaging("power", 0.1), Flag(0), 0.1),
        ('averages = "power"\naveraging_s = 0.5', Averaging("power", 0.1), Flag(0), 0.1),
        ('averages = "none"', Averaging("none"), Flag(0), 0.0),
        # of averaged power: psi(k) - ln k for k values, hardly anything, and not 2.51 dB
        ('averages = "power"\naveraging_s = 1e-3', Averaging("log", 1.0), Flag.LOG_AVERAGED, 0.0),
    ],
)
def test_the_worse_of_calibration_and_front_end_holds(
    averages: str, front: Averaging, flags: Flag, seconds: float
) -> None:
    here = made(averages=averages, front=front)
    assert (here.flags, here.integration_s) == (int(flags), seconds)


@pytest.mark.parametrize("snr_db", [-20.0, -5.0, 0.0, 3.0, 6.0, 10.0, 20.0])
def test_noise_beside_a_carrier_in_averaged_logs(snr_db: float) -> None:
    """Drawn: a carrier in complex Gaussian noise, its logs averaged. Beside it they hold less of
    the noise than they hold without it; taken off whole, a carrier as strong as the noise would
    read 1.65 dB low."""
    rng = np.random.default_rng(7)
    noise = rng.standard_normal((2, 1_000_000)) / math.sqrt(2.0)
    shown = math.exp(np.log((noise**2).sum(axis=0)).mean())
    carrier = 10.0 ** (snr_db / 10.0)
    noise[0] += math.sqrt(carrier)
    read = math.exp(np.log((noise**2).sum(axis=0)).mean())
    dbm = 10.0 * math.log10(shown) - 60.0
    of_noise = f"\nnoise_dbm = {dbm}\nnoise_u_db = 0.1"
    here = made(replace(NOISE, signal="carrier"), averages=LOG + of_noise, axes="x")
    noise_w, u_w = float(here.noise_w[0]) * 1e9, float(here.noise_u_w[0]) * 1e9
    assert (noise_w, u_w) == pytest.approx((shown / 2.0, shown / math.sqrt(12.0)), rel=0.01)
    assert abs(read - noise_w - carrier) <= 1.01 * shown / 2.0


def test_noise_is_taken_off_whole_where_logs_are_not_averaged() -> None:
    of_noise = 'averages = "none"\nnoise_dbm = -60\nnoise_u_db = 0.1'
    here = made(replace(NOISE, signal="carrier"), averages=of_noise, axes="x")
    assert here.noise_w[0] == pytest.approx(1e-9)


def test_a_time_without_an_average_is_a_mistake() -> None:
    with pytest.raises(CalibrationError, match=r"detector.averaging_s: only where averages is"):
        made(averages='averages = "none"\naveraging_s = 1')


def test_volts_of_a_true_rms_detector_are_never_corrected() -> None:
    """Their logs follow another law than those of a log detector: a lower bound."""
    text = (EXAMPLES / "text-lines-calibration.toml").read_text()
    assert 'kind = "rms"' in text
    text = text.replace('averages = "power"', 'averages = "log"\naveraging_s = 1')
    file = calparts.parse(text.encode())
    site = load_site(EXAMPLES / "text-lines-site.toml")
    bands = {name: replace(b, signal="noise", signal_bandwidth_hz=5e6) for name, b in
             site.bands.items()}  # fmt: skip
    assert chain(file, site.channels, bands).flags & Flag.LOG_AVERAGED
    told = list(signalwords.told(replace(site, bands=bands), file, UNDECLARED))
    assert [(text.split(":")[1], ok) for text, ok in told] == [
        (" averaged volts of a true-rms detector read low by what is not known", False)
    ]


def drawn(seed: int, duty: float) -> tuple[Batch, float]:
    """Half an hour of readings, each a mean of the logs of noise on for that share of each.

    Beside them the true mean power of one axis, dBm: -20 while on, 30 dB less in the pauses.
    """
    rng = np.random.default_rng(seed)
    mean_w = np.where(np.arange(VALUES) < duty * VALUES, 1e-5, 1e-8)
    power_w = rng.exponential(mean_w, size=(1900, 3, VALUES))
    counts = np.rint(1000 * (10 * np.log10(power_w) + 30).mean(axis=2)).astype(np.int32)
    times = np.arange(1900, dtype=np.int64) * NS_PER_S
    batch = Batch(times, counts, np.zeros(1900, np.int32), int(times[-1]))
    return batch, 10 * math.log10(float(mean_w.mean())) + 30


def averages(here: Chain, batch: Batch) -> tuple[float, set[int], int]:
    """Mean power of axis x over the last six minutes, dBm; verdicts; flags of the figures.

    The limit lies 20 dB above the field of the noise.
    """
    per_watt = here.k_mid[:, None] * np.full((3, 2), 1e-2 / (3 * 1e-5 * float(here.k_mid[0])))
    place = station(
        here, SCOPES, per_watt, per_watt, (), hold_s=3.0, silence_s=60.0, field_region="far",
        outside_excluded=True,
    )  # fmt: skip
    _, out = pipeline.step(pipeline.start(place, 0), batch, place)
    windows, exposures = gather.stack(out.windows), gather.stack(out.exposures)
    field = gather.stack(out.fields)
    assert windows is not None
    assert exposures is not None
    assert field is not None
    at = np.flatnonzero((windows.channel == 0) & (windows.averaging_s == 360))[-1]
    mean_w = windows.energy_w_ns[at] / windows.covered_ns[at]
    last = exposures.end_ns == exposures.end_ns[-1]
    return (
        10 * math.log10(float(mean_w)) + 30,
        set(exposures.verdict[last].tolist()),
        int(field.flags[-1]),
    )


def test_declared_noise_reads_the_truth_and_may_conform() -> None:
    batch, truth_dbm = drawn(1, 1.0)
    found_dbm, verdicts, flags = averages(made(), batch)
    assert found_dbm == pytest.approx(truth_dbm, abs=0.1)
    assert verdicts == {int(Verdict.CONFORMS)}
    assert flags == int(Flag.CORRECTED_LOG)
    raw_dbm, _, _ = averages(made(averages='averages = "none"'), batch)
    assert raw_dbm == pytest.approx(truth_dbm - 2.5, abs=0.1)


def test_bursts_read_far_too_low_and_never_conform() -> None:
    """Platform facts, 2.2: noise-like bursts of 50 %, 30 dB between: 14.5 dB low."""
    batch, truth_dbm = drawn(2, 0.5)
    found_dbm, verdicts, flags = averages(made(replace(NOISE, signal="bursts")), batch)
    assert found_dbm == pytest.approx(truth_dbm - 14.5, abs=0.2)
    assert verdicts == {int(Verdict.UNDECIDED)}
    assert flags & Flag.LOG_AVERAGED


@pytest.mark.parametrize(
    ("signal", "bandwidth_hz", "averages", "words", "ok"),
    [
        ("bursts", 0.0, LOG, "averaged logs of bursts read 6 to 19 dB low: lower bounds", False),
        ("mixed", 0.0, LOG, "averaged logs of mixed signals read low by what is not", False),
        ("undeclared", 0.0, LOG, "say with signal what the band carries", False),
        ("noise", 5e6, LOG, "2.51 dB are added", True),
        ("noise", 0.0, LOG, "but signal_bandwidth is not given", False),
        ("noise", 5e6, 'averages = "log"', "but averaging_s is not given", False),
        ("noise", 5e4, LOG, "but only 50 values to an average", False),
        ("carrier", 0.0, LOG, "right while its envelope is constant", True),
    ],
)
def test_check_says_what_follows(
    tmp_path: Path, signal: str, bandwidth_hz: float, averages: str, words: str, ok: bool
) -> None:
    (tmp_path / "calibration.toml").write_text(FILE.format(averages=averages))
    site = load_site(EXAMPLES / "detector-board-site.toml")
    bands = {n: Band(n, 8e8, 2e9, "filter", signal, bandwidth_hz) for n in site.bands}
    site = replace(site, bands=bands, calibration=tmp_path / "calibration.toml")
    found = [
        f for f in findings(site, NOW_NS, lambda _: [], averaging_of) if f.where == "band.signal"
    ]
    assert len(found) == 1
    assert words in found[0].text
    assert found[0].ok is ok


def test_check_says_nothing_of_logs_that_nobody_averages() -> None:
    for path in EXAMPLES.glob("*-site.toml"):
        found = list(findings(load_site(path), NOW_NS, lambda _: [], averaging_of))
        assert len(found) > 5
        assert not any(f.where == "band.signal" for f in found)


def test_what_the_sensor_table_says_reaches_the_chain(tmp_path: Path) -> None:
    """A level series whose levels are means of decibels, by its own word."""
    (tmp_path / "levels.csv").write_text("time,rsl\n0,-40\n")
    text = (EXAMPLES / "level-series-site.toml").read_text()
    text = text.replace("levels.csv.gz", "levels.csv").replace(
        'averages = "undeclared"', 'averages = "log"\naveraging_s = 60'
    )
    (tmp_path / "site.toml").write_text(text)
    calibration = "level-series-calibration.toml"
    (tmp_path / calibration).write_text((EXAMPLES / calibration).read_text())
    site = load_site(tmp_path / "site.toml")
    here = chain_for(site, sensor_settings(site))
    assert here.flags & Flag.LOG_AVERAGED
    assert averaging_of(site) == Averaging("log", 60.0)
