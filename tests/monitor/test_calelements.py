"""Elements of the chain: gains, certificates with an uncertainty, due dates."""

from __future__ import annotations

import dataclasses
import math
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest
from scipy.interpolate import interp1d

from monitor import calparts
from monitor.core.errors import CalibrationError
from monitor.core.flags import Flag
from tests.monitor.test_calfile import FILE, read

CABLE = 'serial = "c1"\ncertificate = "none"\n'
ANTENNA = 'serial = "a1"\ncertificate = "none"\n'
ANTENNA_TABLE = '[["700MHz", 30.0], ["1GHz", 31.0], ["3GHz", 34.0]]'
AMPLIFIER = """
[[element]]
type = "preamplifier"
serial = "p1"
certificate = "P 7"
table = [["500MHz", 18.0], ["1GHz", 20.0], ["4GHz", 19.0]]
"""


def changed(*changes: tuple[str, str]) -> str:
    """FILE with texts replaced; each must be there."""
    text = FILE
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    return text


def of(text: str) -> calparts.CalibrationFile:
    return calparts.parse(text.encode())


def test_a_preamplifier_takes_its_gain_away_again(tmp_path: Path) -> None:
    """Against scipy's interp1d over log f, by the design's rule: E squared less the gain."""
    plain, amplified = read(tmp_path, FILE), read(tmp_path, FILE + AMPLIFIER)
    f = plain.frequencies_hz[0]
    gain = interp1d(np.log([5e8, 1e9, 4e9]), [18.0, 20.0, 19.0])
    at = np.searchsorted(amplified.frequencies_hz[0], f)
    found_db = 10 * np.log10(plain.k[0] / amplified.k[0][at])
    np.testing.assert_allclose(found_db, gain(np.log(f)), atol=1e-9)


def test_every_table_of_the_chain_agrees_with_another_interpolation(tmp_path: Path) -> None:
    """scipy's interp1d over log f, added up by hand at every frequency of the grid."""
    chain = read(tmp_path, FILE)
    x = np.log(chain.frequencies_hz[0])
    antenna = interp1d(np.log([7e8, 1e9, 3e9]), [30.0, 31.0, 34.0])
    cable = interp1d(np.log([6e8, 3e9]), [0.5, 1.0])
    db = 10 * np.log10(chain.k[0] / 50.0)
    np.testing.assert_allclose(db, antenna(x) + cable(x), atol=1e-9)


def test_an_antenna_by_its_gain(tmp_path: Path) -> None:
    """9.73 / (lambda sqrt G), common practice, to its three digits; gain by scipy over log f."""
    gains = 'quantity = "gain"\ntable = [["700MHz", 4.0], ["1GHz", 5.0], ["3GHz", 8.0]]'
    chain = read(tmp_path, changed(("table = " + ANTENNA_TABLE, gains)))
    f = chain.frequencies_hz[0]
    gain_dbi = interp1d(np.log([7e8, 1e9, 3e9]), [4.0, 5.0, 8.0])(np.log(f))
    factor_db = 20 * np.log10(9.73 * f / 299_792_458.0) - gain_dbi
    loss_db = interp1d(np.log([6e8, 3e9]), [0.5, 1.0])(np.log(f))
    np.testing.assert_allclose(10 * np.log10(chain.k[0] / 50), factor_db + loss_db, atol=0.002)


def test_a_certificates_uncertainty_is_a_line_of_the_budget(tmp_path: Path) -> None:
    text = changed((ANTENNA, ANTENNA + "u_db = 1.4\nk = 2.1\ndegrees_of_freedom = 12\n"))
    (line,) = [c for c in read(tmp_path, text).contributions[1] if "a1" in c.name]
    assert (line.name, line.kind, line.shared) == ("antenna a1, certificate", "antenna", True)
    assert (line.distribution, line.k, line.degrees_of_freedom) == ("expanded", 2.1, 12.0)
    assert line.u == pytest.approx(1.4 / 2.1)


def test_an_uncertainty_over_frequency_counts_with_its_largest_in_the_band(tmp_path: Path) -> None:
    """The band is 0.8 to 2 GHz: at its upper end by scipy over log f, where U is largest."""
    table = '[["700MHz", 30.0, 1.9], ["1GHz", 31.0, 0.9], ["3GHz", 34.0, 1.8]]\nk = 2'
    chain = read(tmp_path, changed((ANTENNA_TABLE, table)))
    (line,) = [c for c in chain.contributions[0] if c.name == "antenna a1, certificate"]
    u_db = interp1d(np.log([7e8, 1e9, 3e9]), [1.9, 0.9, 1.8])(np.log([8e8, 2e9]))
    assert line.value == pytest.approx(u_db.max())
    assert 1.0 < line.value < 1.9
    np.testing.assert_array_equal(chain.k[0], read(tmp_path, FILE).k[0])


def test_one_certificate_is_one_error_on_every_axis_that_it_serves() -> None:
    """An element of one axis has an error of its own; the same one with a table per axis, not."""
    own = changed((CABLE, CABLE + 'axis = "x"\nu_db = 0.2\nk = 2\n'))
    line = of(own).elements[1].line
    assert line
    assert not line.contribution.shared
    element = own[own.index('[[element]]\ntype = "cable"') : own.index("\n[[contribution]]")]
    both = of(own + "\n" + element.replace('axis = "x"', 'axis = "y"'))
    lines = [e.line.contribution for e in both.elements if e.line]
    assert [(one.name, one.shared) for one in lines] == [("cable c1, certificate", True)] * 2


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        (CABLE, CABLE + "u_db = 0.2\n", "element[2].k: missing"),
        (CABLE, CABLE + "k = 2\n", "element[2].k: without an uncertainty; give u_db, too"),
        (CABLE, CABLE + "u_db = 31\nk = 2\n", "element[2].u_db: 31 is outside 0 to 30"),
        (CABLE, CABLE + "date = 2026-01-02\ndue = 2026-01-02\n", "is not after date, 2026-01-02"),
        (CABLE, CABLE + 'due = "soon"\n', "element[2].due: 'soon' is not a date"),
        (CABLE, CABLE + 'quantity = "gain"\n', "element[2].quantity: unknown key"),
        (ANTENNA, ANTENNA + 'quantity = "loss"\n', "'loss' is not one of antenna_factor, gain"),
        (ANTENNA_TABLE, '[["700MHz", 30, 1], ["3GHz", 34]]\nk = 2', "is not [frequency, dB, U in"),
        (ANTENNA_TABLE, '[["700MHz", 30, 1], ["3GHz", 34, 1]]', "element[1].k: missing"),
        (ANTENNA_TABLE, '[["700MHz", 30, 1], ["3GHz", 34, -1]]\nk = 2', "a U of -1; it is zero or"),
        (ANTENNA_TABLE, '[["700MHz", 30, 1], ["3GHz", 34, 1]]\nu_db = 1\nk = 2', "u_db: stands"),
        (
            'type = "cable"',
            'type = "preamplifier"',
            None,
        ),
        (
            '"cable"\nserial = "c1"\ncertificate = "none"\ntable = [[6e8, 0.5]',
            '"preamplifier"\nserial = "c1"\ncertificate = "none"\ntable = [[6e8, -0.5]',
            "element[2].table: a gain of -0.5 dB; a gain is zero or more",
        ),
    ],
)  # fmt: skip
def test_each_mistake_is_one_line(tmp_path: Path, old: str, new: str, words: str | None) -> None:
    if words is None:
        assert read(tmp_path, changed((old, new))).flags == 0
        return
    with pytest.raises(CalibrationError) as caught:
        read(tmp_path, changed((old, new)))
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_the_same_uncertainty_twice_is_refused(tmp_path: Path) -> None:
    text = changed(
        (ANTENNA, ANTENNA + "u_db = 1\nk = 2\n"),
        ('name = "antenna"', 'name = "antenna a1, certificate"'),
    )
    with pytest.raises(CalibrationError, match="twice for channel 'x'; an element's u_db"):
        read(tmp_path, text)


def test_a_budget_may_consist_of_certificates_alone(tmp_path: Path) -> None:
    bare = FILE[: FILE.index("[[contribution]]")].replace(ANTENNA, ANTENNA + "u_db = 1\nk = 2\n")
    assert read(tmp_path, bare).contributions[0][0].name == "antenna a1, certificate"


def test_the_earliest_due_date_counts(tmp_path: Path) -> None:
    """The cable's is due half a year before the rest; what ends is named."""
    text = changed((CABLE, CABLE + "date = 2025-06-30\ndue = 2026-06-30\n"))
    chain = read(tmp_path, text)
    assert chain.due_utc_ns == int(datetime(2026, 7, 1, tzinfo=UTC).timestamp()) * 10**9
    assert [due.what for due in of(text).dues()] == ["cable c1", "calibration"]
    of_z = text.replace(CABLE, CABLE + 'axis = "z"\n')
    assert [due.what for due in of(of_z).dues("xy")] == ["calibration"]


def test_the_last_date_of_all_is_the_one_to_look_at() -> None:
    text = changed((CABLE, CABLE + "date = 2026-02-01\n"))
    assert calparts.dated(FILE.encode())[0] == "calibration.date"
    where, day = calparts.dated(text.encode())
    assert (where, day.isoformat()) == ("element[2].date", "2026-02-01")


def test_a_laboratory_without_a_name_is_an_examples(tmp_path: Path) -> None:
    text = changed((CABLE, CABLE + 'laboratory = "name of the laboratory"\n'))
    assert read(tmp_path, text).flags == int(Flag.INVENTED_CALIBRATION)


def test_the_least_value_does_not_count_at_one_frequency() -> None:
    """A table's line at a row of it is that row, whatever the largest is."""
    table = '[["700MHz", 30.0, 1.9], ["1GHz", 31.0, 0.9], ["3GHz", 34.0, 1.8]]\nk = 2'
    line = of(changed((ANTENNA_TABLE, table))).elements[0].line
    assert line
    assert line.contribution.value == 1.9
    assert dataclasses.replace(line).over(1e9, 1e9).value == pytest.approx(0.9)
    assert math.isinf(line.contribution.degrees_of_freedom)
