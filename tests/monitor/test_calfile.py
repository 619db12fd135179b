"""Calibration files: the chain they give, and the one line that each mistake gets."""

from __future__ import annotations

import hashlib
import math
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest

from monitor.calfile import load_chain
from monitor.config import Band, Channel, load_site
from monitor.core.calibration import Chain
from monitor.core.errors import CalibrationError, DeviceError
from monitor.core.flags import Flag
from tests.terms import confirmed

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"

FILE = """
[calibration]
id = "board 7"
date = 2026-01-15
due = "2027-01-15"
laboratory = "none"
certificate = "none"
valid_temperature_c = [-10, 50]

[detector]
kind = "log"
bits = 12
reference_v = 2.048
gain = 0.5
valid_v = [0.3, 2.2]
curve = [[-60, 2.0], [-30, 1.34], [0, 0.68]]
range_dbm = [-58, -2]
averages = "none"

[[element]]
type = "antenna"
serial = "a1"
certificate = "none"
table = [["700MHz", 30.0], ["1GHz", 31.0], ["3GHz", 34.0]]

[[element]]
type = "cable"
serial = "c1"
certificate = "none"
table = [[6e8, 0.5], ["3GHz", 1.0]]

[[contribution]]
name = "antenna"
value = 1.0
distribution = "expanded"
k = 2
shared = true

[[contribution]]
name = "mismatch"
value = 0.3
distribution = "u_shaped"
shared = false
kind = "mismatch"
""" + confirmed()
THREE = tuple(Channel(axis, axis, "main") for axis in "xyz")
BANDS = {"main": Band("main", 8e8, 2e9)}


def read(folder: Path, text: str, channels: tuple[Channel, ...] = THREE) -> Chain:
    """The chain of a calibration file of that text."""
    path = folder / "calibration.toml"
    path.write_text(text, encoding="utf-8")
    return load_chain(path, channels, BANDS)


def test_the_chain_of_a_file(tmp_path: Path) -> None:
    """Antenna factor and loss by hand at the ends of the band and at the knot, 1 GHz."""
    chain = read(tmp_path, FILE)
    assert len(chain.tables) == len(chain.k) == len(chain.contributions) == 3
    f, k = chain.frequencies_hz[0], chain.k[0]

    def db(hz: float) -> float:
        loss = 0.5 + 0.5 * math.log(hz / 6e8) / math.log(5.0)
        if hz <= 1e9:
            return 30.0 + math.log(hz / 7e8) / math.log(1e9 / 7e8) + loss
        return 31.0 + 3.0 * math.log(hz / 1e9) / math.log(3.0) + loss

    for hz in (8e8, 1e9, 2e9):
        (at,) = np.flatnonzero(f == hz)
        assert k[at] == pytest.approx(50 * 10 ** (db(hz) / 10), rel=1e-12)
    half = (db(2e9) - db(8e8)) / 2
    assert chain.k_mid[0] == pytest.approx(50 * 10 ** ((db(8e8) + half) / 10), rel=1e-12)
    spread = next(line for line in chain.contributions[0] if "response" in line.name)
    assert spread.value == pytest.approx(half, rel=1e-9)
    assert [line.name for line in chain.contributions[0]][:2] == ["antenna", "mismatch"]


def test_what_else_the_chain_knows(tmp_path: Path) -> None:
    chain = read(tmp_path, FILE)
    assert chain.flags == 0
    assert chain.valid_temperature_c == (-10.0, 50.0)
    assert chain.due_utc_ns == int(datetime(2027, 1, 16, tzinfo=UTC).timestamp()) * 10**9
    assert chain.resolution is None
    assert chain.document == FILE.encode()
    assert chain.identity == hashlib.sha256(FILE.encode()).hexdigest()


def test_volts_are_counts_times_reference_over_gain(tmp_path: Path) -> None:
    """2.048 V over 4096 counts at gain 0.5 is 1 mV to the count: count 1340 is -30 dBm."""
    power_w, flags = read(tmp_path, FILE).tables[1].convert(np.array([1340, 0, 4095], np.int32))
    assert power_w[0] == pytest.approx(1e-6, rel=1e-9)
    wire, overload = Flag.NO_SIGNAL_WIRE, Flag.NO_SIGNAL_WIRE | Flag.ABOVE_RANGE | Flag.CLIPPED
    assert flags.tolist() == [0, int(overload), int(wire)]  # the curve falls


def test_fewer_than_three_axes_is_a_component(tmp_path: Path) -> None:
    assert read(tmp_path, FILE, THREE[:2]).flags == int(Flag.COMPONENT_ONLY)


def test_averaged_logs_are_marked(tmp_path: Path) -> None:
    chain = read(tmp_path, FILE.replace('averages = "none"', 'averages = "log"'))
    assert chain.flags == int(Flag.LOG_AVERAGED)


def test_an_element_and_a_detector_of_one_axis_serve_that_axis(tmp_path: Path) -> None:
    cable = 'type = "cable"\n'
    per_axis = FILE.replace(cable, cable + 'axis = "x"\n')
    detector = per_axis[per_axis.index("[detector]") : per_axis.index("[[element]]")]
    several = "".join(
        detector.replace("[detector]", f'[[detector]]\naxis = "{axis}"').replace("0.68", volts)
        for axis, volts in (("x", "0.68"), ("y", "0.70"), ("z", "0.72"))
    )
    chain = read(tmp_path, per_axis.replace(detector, several))
    assert chain.k[0][0] / chain.k[1][0] == pytest.approx(
        10 ** (0.05 + 0.05 * math.log(8 / 6) / math.log(5))
    )
    assert len({table.identity for table in chain.tables}) == 3


def test_stepped_volts_and_scales_say_what_a_count_is(tmp_path: Path) -> None:
    stepped = FILE.replace("bits = 12\nreference_v = 2.048\ngain = 0.5", "volts_per_count = 0.0001")
    assert read(tmp_path, stepped).resolution == 0.0001
    assert read(tmp_path, scale()).resolution == 0.001


def scale() -> str:
    """FILE with a scale in the place of its detector."""
    start, end = FILE.index("[detector]"), FILE.index("[[element]]")
    body = 'kind = "scale"\nquantity = "dbfs"\nresolution = 0.001\ndbfs_to_dbm = -10\n'
    rest = 'range_dbm = [-80, -12]\naverages = "power"\naveraging_s = 0.5\n'
    return FILE[:start] + "[detector]\n" + body + rest + FILE[end:]


def test_scale_of_full_scale_levels(tmp_path: Path) -> None:
    """Below the range a reading is kept as it is: only an average may be found too weak."""
    chain = read(tmp_path, scale())
    power_w, flags = chain.tables[0].convert(np.array([-30_000, -1_999, -70_001, 8_001], np.int32))
    np.testing.assert_allclose(10 * np.log10(power_w / 1e-3), [-40.0, -12.0, -80.001, -12.0])
    assert flags.tolist() == [0, int(Flag.ABOVE_RANGE), 0, int(Flag.ABOVE_RANGE)]
    np.testing.assert_allclose(chain.least_w, 1e-11)
    assert chain.integration_s == 0.5


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('["3GHz", 1.0]', '["3GHz", -1.0]', "element[2].table: a loss of -1 dB; a loss is zero"),
        ("[-30, 1.34]", "[-30, 2.34]", "detector.curve: not monotonic: volts 2 then 2.34"),
        ("[-30, 1.34]", "[-30, nan]", "detector.curve: row 2: [-30, nan] is not [dBm, volts]"),
        ("[-30, 1.34]", "[-30]", "detector.curve: row 2: [-30] is not [dBm, volts]"),
        ('["1GHz", 31.0]', '["0.5GHz", 31.0]', "element[1].table: 500 MHz stands out of order"),
        ('["1GHz", 31.0]', '["700MHz", 31.0]', "element[1].table: 700 MHz stands twice"),
        ('["1GHz", 31.0]', '["1THz", 31.0]', "element[1].table: row 2: '1THz': not a frequency"),
        ('["1GHz", 31.0]', '["1GHz"]', "element[1].table: row 2"),
        (
            '["700MHz", 30.0]',
            '["900MHz", 30.0]',
            "element[1].table: antenna a1 covers 900 MHz to 3 GHz, but 800 MHz to 2 GHz is",
        ),
        ('[6e8, 0.5], ["3GHz", 1.0]', '[6e8, 0.5], ["1GHz", 1.0]', "cable c1 covers 600 MHz to 1"),
        ('type = "cable"', 'type = "string"', "element[2].type: 'string' is not one of antenna"),
        ('type = "cable"', 'type = "antenna"', "channel 'x' needs one antenna; there is 2 of them"),
        ('type = "antenna"', 'type = "filter"', "channel 'x' needs one antenna; there is none"),
        ("value = 0.3", "value = -0.3", "contribution[2].value: -0.3 is outside"),
        ('"u_shaped"', '"flat"', "contribution[2].distribution: 'flat' is not one of normal"),
        ('"u_shaped"', '"normal"\nk = 2', "contribution[2].k: unknown key"),
        ("\nk = 2", "", "contribution[1].k: missing"),
        ("shared = false", "", "contribution[2].shared: missing"),
        ('name = "mismatch"', 'name = "antenna"', "contribution: 'antenna' twice for channel 'x'"),
        ("valid_v = [0.3, 2.2]", "valid_v = [0.3, 1.9]", "detector.valid_v: must hold the range's"),
        ("valid_v = [0.3, 2.2]", "valid_v = [2.2, 0.3]", "detector.valid_v: must be two numbers"),
        ("range_dbm = [-58, -2]", "range_dbm = [-70, -2]", "detector.range_dbm: reaches beyond"),
        ("bits = 12", "bits = 19", "detector.bits: 19 is outside 4 to 18"),
        ("bits = 12", "", "detector.bits: missing; give bits and reference_v"),
        ("reference_v = 2.048", "", "detector.reference_v: missing"),
        ('averages = "none"', "", "detector.averages: missing"),
        (
            'kind = "log"',
            'kind = "lin"',
            "detector.kind: 'lin' is not one of log, rms, scale, probe",
        ),
        ("gain = 0.5", "gian = 0.5", "detector.gian: unknown key; did you mean gain?"),
        ('due = "2027-01-15"', "due = 2026-01-15", "calibration.due: 2026-01-15 is not after date"),
        ('due = "2027-01-15"', 'due = "soon"', "calibration.due: 'soon' is not a date"),
        ('due = "2027-01-15"', "due = 5", "calibration.due: 5 is not a date"),
        ("[-10, 50]", "[50, -10]", "calibration.valid_temperature_c: must be two numbers"),
        ("[calibration]", "[calibration", "calibration.toml: not valid TOML"),
        ("[calibration]", "[kalibration]", "calibration.toml: calibration: missing"),
        ("[detector]", "[more]\n[detector]", "calibration.toml: more: unknown key"),
    ],
)
def test_each_mistake_is_one_line_that_names_its_place(
    tmp_path: Path, old: str, new: str, words: str
) -> None:
    assert old in FILE
    with pytest.raises(CalibrationError) as caught:
        read(tmp_path, FILE.replace(old, new, 1))
    text = str(caught.value)
    assert text.startswith("calibration.toml: ")
    assert words in text
    assert "\n" not in text
    assert caught.value.exit_code == 2


def test_a_figure_without_its_uncertainty_is_refused(tmp_path: Path) -> None:
    with pytest.raises(CalibrationError, match="contribution: none given"):
        read(tmp_path, FILE[: FILE.index("[[contribution]]")])


def test_one_error_that_is_two_shapes_is_refused(tmp_path: Path) -> None:
    """Of axis x it is normal, of axis y rectangular, and shared: one error has one shape."""
    x = '\n[[contribution]]\nname = "gain"\naxis = "x"\nvalue = 1\ndistribution = "normal"\n'
    x += "shared = true\n"
    y = x.replace('"x"', '"y"').replace('"normal"', '"rectangular"')
    with pytest.raises(CalibrationError, match="calibration.toml: contribution: gain: shared, but"):
        read(tmp_path, FILE + x + y)


def test_too_fine_a_scale_is_refused(tmp_path: Path) -> None:
    with pytest.raises(CalibrationError, match="detector.resolution: .*262144"):
        read(tmp_path, scale().replace("resolution = 0.001", "resolution = 0.0001"))


def test_a_missing_file_cannot_be_reached(tmp_path: Path) -> None:
    with pytest.raises(
        DeviceError, match="none.toml: the calibration file cannot be read"
    ) as caught:
        load_chain(tmp_path / "none.toml", THREE, BANDS)
    assert caught.value.exit_code == 3


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*-site.toml")), ids=lambda p: p.stem)
def test_every_example_has_a_chain(path: Path) -> None:
    site = load_site(path)
    chain = load_chain(site.calibration, site.channels, site.bands)
    assert len(chain.tables) == len(site.channels)
    assert chain.resolution == site.sensor_options.get("resolution", chain.resolution)


@pytest.mark.parametrize(
    ("old", "new", "invented"),
    [
        ("", "", False),
        ('id = "board 7"', 'id = "board 7"\ninvented = false', False),
        ('id = "board 7"', 'id = "board 7"\ninvented = true', True),
        ('laboratory = "none"', 'laboratory = "name of the laboratory"', True),
        ('certificate = "none"', 'certificate = "number of the certificate "', True),
        ('serial = "a1"', 'serial = "serial number"', True),
        ('serial = "c1"\ncertificate = "none"', 'serial = "c1"\ncertificate = "number of the'
         ' certificate"', True),
    ],
)  # fmt: skip
def test_figures_without_a_certificate_are_invented(
    tmp_path: Path, old: str, new: str, invented: bool
) -> None:
    assert old in FILE
    path = tmp_path / "calibration.toml"
    path.write_text(FILE.replace(old, new, 1), encoding="utf-8")
    channels = [Channel(axis, axis, "b") for axis in "xyz"]
    chain = load_chain(path, channels, {"b": Band("b", 8e8, 2e9)})
    assert bool(chain.flags & Flag.INVENTED_CALIBRATION) is invented


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*-calibration.toml")), ids=lambda p: p.name)
def test_the_examples_say_that_they_are_invented(path: Path) -> None:
    assert "\ninvented = true\n" in path.read_text(encoding="utf-8")
