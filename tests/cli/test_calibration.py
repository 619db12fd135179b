"""fieldsill calibration: what it shows of a file, and what it finds between two."""

from __future__ import annotations

import hashlib
import math
from pathlib import Path

import pytest

from monitor.calfile import load_chain
from monitor.config import Band, Channel
from monitor.core.uncertainty import coverage_factor
from tests.cli.command import Answer, run

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
BOARD = EXAMPLES / "detector-board-calibration.toml"
BAND = "700MHz:2.7GHz"


def show(capsys: pytest.CaptureFixture[str], *arguments: object) -> Answer:
    return run(capsys, ["calibration", "show", *arguments])


def compare(capsys: pytest.CaptureFixture[str], *arguments: object) -> Answer:
    return run(capsys, ["calibration", "compare", *arguments])


def changed(folder: Path, *changes: tuple[str, str], source: Path = BOARD) -> Path:
    """A copy of a file with texts replaced; each must be there."""
    text = source.read_text(encoding="utf-8")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    path = folder / "other.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_show_as_one_document(capsys: pytest.CaptureFixture[str]) -> None:
    document = show(capsys, BOARD, "--band", BAND, "--json").document
    assert document["identity"] == hashlib.sha256(BOARD.read_bytes()).hexdigest()
    assert (document["date"], document["due"]) == ("2024-09-14", "2027-09-14")
    assert document["invented"] is True
    assert document["axes"] == ["x", "y", "z"]
    assert [e["type"] for e in document["elements"]] == ["antenna", "filter", "cable"]
    antenna = document["elements"][0]
    assert (antenna["low_hz"], antenna["high_hz"]) == (650e6, 2.8e9)
    assert (antenna["smallest_db"], antenna["largest_db"]) == (44.2, 46.1)
    assert document["band"] == {"low_hz": 700e6, "high_hz": 2.7e9}
    assert document["monte_carlo"] is None


def test_what_a_detector_averages_is_shown(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    log = ('averages = "none"', 'averages = "log"\naveraging_s = 0.002')
    path = changed(tmp_path, log)
    (detector,) = show(capsys, path, "--json").document["detectors"]
    assert (detector["averages"], detector["averaging_s"]) == ("log", 0.002)
    assert "averages log over 0.002 s" in show(capsys, path).out
    (plain,) = show(capsys, BOARD, "--json").document["detectors"]
    assert plain["averaging_s"] is None
    assert "averaging_s" in compare(capsys, BOARD, path).out


def test_response_at_a_knot_by_hand(capsys: pytest.CaptureFixture[str]) -> None:
    """1 GHz: 44.2 + 0.4 log(10/9)/log(15/9), the filter's 0.7, the cable's line from 0.6 GHz."""
    document = show(capsys, BOARD, "--json").document
    (row,) = [r for r in document["response"] if r["axis"] == "y" and r["frequency_hz"] == 1e9]
    antenna = 44.2 + 0.4 * math.log(10 / 9) / math.log(15 / 9)
    cable = 0.45 + 0.21 * math.log(10 / 6) / math.log(2)
    assert row["factor_db_per_m"] == pytest.approx(antenna + 0.7 + cable, abs=1e-9)
    assert row["e2_per_w"] == pytest.approx(50 * 10 ** (row["factor_db_per_m"] / 10))


def test_uncertainty_is_that_of_the_chain(capsys: pytest.CaptureFixture[str]) -> None:
    """k is the station's own; U = k u; the bounds are 20 and 10 log."""
    found = show(capsys, BOARD, "--band", BAND, "--json").document["uncertainty"]
    channels = [Channel(axis, axis, "main") for axis in "xyz"]
    chain = load_chain(BOARD, channels, {"main": Band("main", 700e6, 2.7e9)})
    assert found["k"] == pytest.approx(coverage_factor(chain.contributions), rel=1e-12)
    assert found["expanded_db"] == pytest.approx(found["k"] * found["standard_db"])
    assert found["expanded_k2_db"] == pytest.approx(2 * found["standard_db"])
    assert found["effective_degrees_of_freedom"] is None
    assert found["factor_e_high"] == pytest.approx(10 ** (found["expanded_db"] / 20))
    assert found["factor_s_low"] == pytest.approx(10 ** (-found["expanded_db"] / 10))


def test_table_of_contributions(capsys: pytest.CaptureFixture[str]) -> None:
    document = show(capsys, BOARD, "--band", BAND, "--json").document
    rows = {row["name"]: row for row in document["contributions"]}
    assert rows["antenna factor, certificate"]["u"] == pytest.approx(0.6)
    assert rows["mismatch"]["u"] == pytest.approx(0.25 / math.sqrt(2) / math.sqrt(3))
    assert rows["mismatch"]["channels"] == 3
    assert rows["mismatch"]["degrees_of_freedom"] is None
    assert sum(row["variance_share"] for row in rows.values()) == pytest.approx(1.0)
    huge = show(capsys, BOARD, "--band", BAND, "--shares", "1e308,1e308,1e308", "--json").document
    assert huge["shares"] == pytest.approx([1 / 3] * 3)
    assert huge["uncertainty"]["standard_db"] == pytest.approx(
        document["uncertainty"]["standard_db"]
    )
    alone = show(capsys, BOARD, "--band", BAND, "--shares", "0,0,7", "--json").document
    assert alone["shares"] == [0.0, 0.0, 1.0]
    rows = {row["name"]: row for row in alone["contributions"]}
    assert rows["mismatch"]["u"] == pytest.approx(0.25 / math.sqrt(2))


def test_few_degrees_of_freedom_widen_the_interval(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = changed(tmp_path, ("value = 1.2\n", "value = 1.2\ndegrees_of_freedom = 3\n"))
    few, exact = (
        show(capsys, p, "--band", BAND, "--json").document["uncertainty"] for p in (path, BOARD)
    )
    assert few["standard_db"] == exact["standard_db"]
    assert few["k"] > exact["k"] + 0.05
    u = few["standard_db"]
    assert few["effective_degrees_of_freedom"] == pytest.approx(u**4 / (0.6**4 / 3))


def test_for_people(capsys: pytest.CaptureFixture[str]) -> None:
    answer = show(capsys, BOARD, "--band", BAND, "--monte-carlo", 20_000)
    assert answer.code == 0
    for words in (
        "roof-1, autumn, calibrated 2024-09-14",
        "invented: nothing conforms",
        "antenna serial number: certificate number of the certificate; 650 MHz to 2.8 GHz",
        "response over band 700 MHz to 2.7 GHz",
        "Expanded uncertainty U = 2.20 dB (95 %, k = 1.930 from the distribution)",
        "with k = 2 it would be 2.28 dB",
        "E lies between 0.776 and 1.289 times the shown one (-22.4 %, +28.9 %)",
        "By 20000 draws, seed 1:",
    ):
        assert words in answer.out
    assert max(len(line) for line in answer.out.splitlines()) < 160


def test_an_overdue_calibration_says_so(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = changed(tmp_path, ("due = 2027-09-14", "due = 2024-10-01"))
    assert show(capsys, path, "--json").document["overdue"] is True
    assert "OVERDUE" in show(capsys, path).out


def test_draws_stand_beside_the_analytic_figure(capsys: pytest.CaptureFixture[str]) -> None:
    """Within 2 % of U; the same seed gives the same document."""
    arguments = (BOARD, "--shares", "3,2,1", "--monte-carlo", 200_000, "--seed", 4, "--json")
    document = show(capsys, *arguments).document
    found = document["monte_carlo"]
    assert (found["draws"], found["seed"]) == (200_000, 4)
    assert found["analytic_db"] == document["uncertainty"]["expanded_at_these_shares_db"]
    assert found["expanded_db"] == pytest.approx(found["analytic_db"], rel=0.02)
    assert show(capsys, *arguments).document["monte_carlo"] == found


def test_one_axis_of_a_file(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """An antenna of the z axis serves z alone; asked for x there is one line on what is missing."""
    path = changed(tmp_path, ('type = "antenna"', 'type = "antenna"\naxis = "z"'))
    assert show(capsys, path, "--json").document["axes"] == ["z"]
    answer = show(capsys, path, "--axes", "x")
    assert answer.code == 2
    assert "channel 'x' needs one antenna; there is none" in answer.one_line


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--band", "1GHz"], "write LOW:HIGH"),
        (["--band", "2GHz:1GHz"], "low end must lie below"),
        (["--band", "100MHz:1GHz"], "covers 650 MHz to 2.8 GHz, but 100 MHz"),
        (["--axes", "xx"], "each once"),
        (["--axes", ""], "each once"),
        (["--shares", "1,2"], "one number of zero or more for each of xyz"),
        (["--shares", "a"], "write numbers"),
        (["--shares", "0,0,0"], "all are zero"),
        (["--band", "1e-300:1e300"], "not a frequency"),
        (["--monte-carlo", "10"], "1000<=x<=10000000"),
    ],
)
def test_wrong_arguments_are_one_line(
    arguments: list[str], words: str, capsys: pytest.CaptureFixture[str]
) -> None:
    answer = show(capsys, BOARD, *arguments)
    assert answer.code == 2
    assert words in answer.one_line


def test_a_file_that_is_not_there(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    answer = show(capsys, tmp_path / "none.toml")
    assert answer.code == 3
    assert "cannot be read" in answer.one_line


def test_a_file_is_the_same_as_itself(capsys: pytest.CaptureFixture[str]) -> None:
    document = compare(capsys, BOARD, BOARD, "--json").document
    assert document["same"] is True
    assert document["differences"] == []
    assert document["largest_response_db"] == 0.0
    assert {row["largest_db"] for row in document["detectors"]} == {0.0}
    assert document["uncertainty"]["a"] == document["uncertainty"]["b"]
    assert "The same to the byte." in compare(capsys, BOARD, BOARD).out


def test_what_a_new_certificate_changed(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Antenna 0.3 dB up at 900 MHz; volts at 0 dBm 4 mV of 22 mV/dB off: 0.18 dB."""
    path = changed(
        tmp_path,
        ('certificate = "number of the certificate"', 'certificate = "none"'),
        ('["900MHz", 44.2]', '["900MHz", 44.5]'),
        ("[0, 0.680]", "[0, 0.684]"),
        ("value = 1.2\n", "value = 1.4\n"),
    )
    document = compare(capsys, BOARD, path, "--json").document
    assert document["same"] is False
    found = {row["what"]: (row["a"], row["b"]) for row in document["differences"]}
    assert found["calibration: certificate"] == ("number of the certificate", "none")
    assert found["element antenna: table"] == (["900 MHz 44.2 dB/m"], ["900 MHz 44.5 dB/m"])
    assert found["contribution 'antenna factor, certificate': value"] == ("1.2", "1.4")
    assert found["detector: curve"] == (["0 0.68"], ["0 0.684"])
    assert len(found) == 4
    assert document["largest_response_db"] == pytest.approx(0.3)
    off = {row["frequency_hz"]: row["db"] for row in document["response"] if row["axis"] == "x"}
    assert off[650e6] == pytest.approx(0.0, abs=1e-12)
    assert off[900e6] == pytest.approx(0.3)
    detector = document["detectors"][0]
    assert detector["largest_db"] == pytest.approx(4 / 22, abs=0.02)
    assert detector["at_dbm"] == pytest.approx(0.0, abs=0.1)
    for name, file in (("a", BOARD), ("b", path)):
        alone = show(capsys, file, "--json").document["uncertainty"]
        assert document["uncertainty"][name] == alone
    assert document["uncertainty"]["b"]["expanded_db"] > document["uncertainty"]["a"]["expanded_db"]
    text = compare(capsys, BOARD, path).out
    assert "element antenna: table: 900 MHz 44.2 dB/m -> 900 MHz 44.5 dB/m" in text
    assert "900 MHz    +0.30 dB" in text


def test_elements_that_only_one_file_has(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = changed(tmp_path, ('type = "filter"', 'type = "attenuator"'))
    rows = compare(capsys, BOARD, path, "--json").document["differences"]
    assert {(row["what"], row["a"], row["b"]) for row in rows} == {
        ("element filter", "there", None),
        ("element attenuator", None, "there"),
    }


def test_only_remarks_differ(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = changed(tmp_path, ("EVERY FIGURE HERE", "Every figure here"))
    answer = compare(capsys, BOARD, path)
    assert answer.code == 0
    assert "only layout or remarks do" in answer.out


def test_files_without_a_common_band(capsys: pytest.CaptureFixture[str]) -> None:
    answer = compare(capsys, BOARD, EXAMPLES / "level-series-calibration.toml")
    assert answer.code == 2
    assert "no band in common" in answer.one_line
