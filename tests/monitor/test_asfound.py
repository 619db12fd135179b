"""What a calibration found of the one before: its table, its event, and the data in between."""

from __future__ import annotations

import hashlib
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from monitor import calfile
from monitor.calparts import CalibrationFile, parse
from monitor.config import Site, load_site
from monitor.core.errors import CalibrationError
from monitor.core.flags import UPPER_BOUND
from monitor.core.limits import Scope
from monitor.core.rows import Event, ExposureRows, FieldRows
from monitor.inforce import InForce, in_force
from monitor.record import schema
from monitor.record.reader import Record
from monitor.record.types import ClockFix, Commit
from monitor.record.writer import Writer

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
OLD = (EXAMPLES / "detector-board-calibration.toml").read_text()
NEW = OLD.replace('id = "roof-1, autumn"', 'id = "roof-1, later"').replace(
    "date = 2024-09-14", "date = 2026-09-14"
)
FOUND = '\n[as_found]\ndate = 2026-09-10\nprevious = "roof-1, autumn"\n'
MINUTE = 60_000_000_000
UTC0 = 1_700_000_000_000_000_000


def found(more: str) -> CalibrationFile:
    return parse((NEW + FOUND + more).encode())


@pytest.mark.parametrize(
    ("more", "drift_db"),
    [
        ("db = 0.4\n", 0.4),
        ("db = -0.4\n", 0.4),
        ('table = [["700MHz", 0.1], ["2.7GHz", -0.5]]\n', 0.5),
        ('[[as_found.element]]\ntype = "cable"\ndb = 0.2\n'
         '[[as_found.element]]\ntype = "antenna"\naxis = "x"\ndb = 0.1\n', 0.3),
        ('db = 0.1\n[[as_found.element]]\ntype = "antenna"\naxis = "x"\ndb = -0.3\n', 0.2),
    ],
)  # fmt: skip
def test_the_largest_drift_of_any_channel_counts(more: str, drift_db: float) -> None:
    site = load_site(EXAMPLES / "detector-board-site.toml")
    as_found = found(more).as_found
    assert as_found is not None
    assert as_found.over(site.channels, site.bands) == pytest.approx(drift_db)


@pytest.mark.parametrize(
    ("more", "line"),
    [
        ("", "as_found.db: missing"),
        ("db = 0.4\ntable = [[1e9, 1], [2e9, 1]]\n", "as_found.db: stands beside a table"),
        ("db = 31\n", "as_found.db: 31 is outside"),
        ("db = 0.1\nadjusted = 1\n", "as_found.adjusted: 1 is neither"),
        ("db = 0.1\nshift = 1\n", "as_found.shift: unknown key"),
        ('[[as_found.element]]\ntype = "cable"\n', "as_found.element[1].db: missing"),
    ],
)
def test_a_mistake_in_it_is_named(more: str, line: str) -> None:
    with pytest.raises(CalibrationError) as caught:
        found(more)
    assert line in str(caught.value)


def test_it_cannot_be_later_than_the_calibration() -> None:
    text = NEW + FOUND.replace("2026-09-10", "2026-09-15") + "db = 0.1\n"
    with pytest.raises(CalibrationError, match=r"as_found.date: 2026-09-15 is after"):
        parse(text.encode())


@pytest.fixture
def site(tmp_path: Path) -> Site:
    """A site with a record of two runs in one boot: ten minutes on OLD, then on NEW with FOUND."""
    schema.create(tmp_path / "record.db", True)
    there = load_site(EXAMPLES / "detector-board-site.toml")
    return replace(
        there, record_path=tmp_path / "record.db", calibration=tmp_path / "calibration.toml"
    )


def begin(site: Site, text: str, boot_ns: int) -> InForce:
    """A run begins on a calibration file of that text, as the daemon does it."""
    site.calibration.write_text(text)
    force = in_force(site, lambda file: calfile.chain(file, site.channels, site.bands), None)
    writer = Writer(site.record_path, simulated=True)
    boot = writer.begin_boot("one", "machine")
    digest = writer.put_document("calibration", force.chain.document)
    events = [Event(boot_ns, "start", "daemon", {"calibration": digest})]
    events += [replace(event, boot_ns=boot_ns) for event in force.events]
    writer.commit(boot, Commit(events=tuple(events), clock_fixes=(ClockFix(0, UTC0, "test", 0),)))
    writer.close()
    return force


def windows(site: Site, first_minute: int, n: int, flags: int = 0) -> None:
    """Minutes of windows of 360 s, U 1.5 dB at k = 2."""
    ends = (first_minute + np.arange(1, n + 1)) * MINUTE
    ones = np.ones(n)
    rows = FieldRows(
        ends, np.full(n, 360), ones, ones, ones, ones, 1.5 * ones, 2 * ones, ones, ones,
        np.full(n, flags), np.zeros(n),
    )  # fmt: skip
    writer = Writer(site.record_path, simulated=True)
    half = 0.5 * ones
    ratios = ExposureRows(
        ends, np.zeros(n, np.int64), half, half, half, 1.5 * ones, np.zeros(n, np.int64),
        np.zeros(n),
    )  # fmt: skip
    writer.put_scopes([Scope("made-up", "1", "general_public", "local", 360.0, True, "test")])
    writer.commit(writer.begin_boot("one", "machine"), Commit(fields=rows, exposures=ratios))
    writer.close()


def test_a_drift_widens_what_rests_on_the_calibration_before_and_nothing_else(site: Site) -> None:
    assert begin(site, OLD, 0).events == ()
    windows(site, 0, 30)
    text = NEW + FOUND + "db = 0.9\nadjusted = true\n"
    (event,) = begin(site, text, 30 * MINUTE).events
    assert (event.kind, event.name) == ("calibration", "drift")
    assert "roof-1, later found a drift of 0.9 dB since roof-1, autumn" in str(event.body["text"])
    assert {key: value for key, value in event.body.items() if key != "text"} == {
        "from_utc": "2024-09-14T00:00:00Z", "to_utc": "2026-09-10T00:00:00Z", "drift_db": 0.9,
        "previous": "roof-1, autumn", "documents": [hashlib.sha256(OLD.encode()).hexdigest()],
        "next": hashlib.sha256(text.encode()).hexdigest(), "adjusted": True,
    }  # fmt: skip
    windows(site, 30, 30)
    assert begin(site, text, 60 * MINUTE).events == ()  # said once
    with Record.open(site.record_path) as record:
        stored = record.fields(1).u_db
        seen = record.history(UTC0, UTC0 + 70 * MINUTE, 360)
        coarse = record.history(UTC0, UTC0 + 70 * MINUTE, 360, 3)
    assert set(stored) == {1.5}
    # 1.5 dB at k = 2: sqrt(0.75^2 + 0.9^2 / 3) = 0.912414, times 2; windows until minute 36 reach
    # back into the data that rest on the calibration before
    wide = 2 * math.sqrt(0.75**2 + 0.9**2 / 3)
    assert wide == pytest.approx(1.824829, abs=1e-6)
    np.testing.assert_allclose(seen.u_db, [wide] * 35 + [1.5] * 25, rtol=1e-12)
    np.testing.assert_array_equal(seen.widened_by_drift_db, [0.9] * 35 + [0.0] * 25)
    assert coarse.u_db[0] == pytest.approx(wide)
    assert (coarse.u_db[-1], coarse.widened_by_drift_db[-1]) == (1.5, 0.0)


def test_a_drift_can_be_corrected_by_a_later_file(site: Site) -> None:
    begin(site, OLD, 0)
    windows(site, 0, 30)
    for at, db in enumerate((0.9, 0.3, 0.0), 30):
        (event,) = begin(site, NEW + FOUND + f"db = {db}\n", at * MINUTE).events
        assert event.body["drift_db"] == db
        with Record.open(site.record_path) as record:
            seen = record.history(UTC0, UTC0 + 70 * MINUTE, 360)
        assert set(seen.widened_by_drift_db) == {db}
        assert seen.u_db[0] == pytest.approx(2 * math.sqrt(0.75**2 + db**2 / 3))


def test_a_bound_that_is_stated_is_raised_by_the_drift(site: Site) -> None:
    begin(site, OLD, 0)
    windows(site, 0, 10)
    windows(site, 10, 10, int(UPPER_BOUND))
    begin(site, NEW + FOUND + "db = -1.0\n", 20 * MINUTE)
    with Record.open(site.record_path) as record:
        seen = record.history(UTC0, UTC0 + 70 * MINUTE, 360)
    for e in (seen.e_high, seen.e_mean):  # the mean of such a window is the bound as well
        np.testing.assert_allclose(e, [1.0] * 10 + [10 ** (1 / 20)] * 10)
    np.testing.assert_allclose(seen.e_low, 1.0)
    ((low, mean, high),) = seen.ratios.values()
    np.testing.assert_allclose(low, 0.5)
    for ratio in (mean, high):
        np.testing.assert_allclose(ratio, [0.5] * 10 + [0.5 * 10**0.1] * 10)


def test_a_mean_beside_bounds_is_not_raised_with_them(site: Site) -> None:
    """Of hours in which some windows were below their detection limit and some were not."""
    begin(site, OLD, 0)
    windows(site, 0, 3 * 24 * 60)
    windows(site, 3 * 24 * 60, 30, int(UPPER_BOUND))
    begin(site, NEW + FOUND + "db = -1.0\n", 4 * 24 * 60 * MINUTE)
    with Record.open(site.record_path) as record:
        hours = record.history(UTC0, UTC0 + 3 * 24 * 60 * MINUTE + 30 * MINUTE, 360, 20)
    assert hours.bin_ns
    np.testing.assert_allclose(hours.e_mean[:-1], 1.0)


def test_hours_and_days_are_widened_too(site: Site) -> None:
    begin(site, OLD, 0)
    windows(site, 0, 3 * 24 * 60)
    begin(site, NEW + FOUND + "db = 0.9\n", 3 * 24 * 60 * MINUTE)
    windows(site, 3 * 24 * 60, 2 * 24 * 60)
    with Record.open(site.record_path) as record:
        hours = record.history(UTC0, UTC0 + 5 * 24 * 60 * MINUTE, 360, 100)
    assert hours.bin_ns
    assert hours.widened_by_drift_db[0] == 0.9
    assert hours.u_db[0] == pytest.approx(1.824829, abs=1e-6)
    assert (hours.widened_by_drift_db[-1], hours.u_db[-1]) == (0.0, 1.5)


def test_a_calibration_that_the_record_never_used_widens_nothing(site: Site) -> None:
    begin(site, OLD.replace("roof-1, autumn", "another"), 0)
    assert begin(site, NEW + FOUND + "db = 0.9\n", 30 * MINUTE).events == ()
    other = NEW + FOUND.replace("roof-1, autumn", hashlib.sha256(NEW.encode()).hexdigest())
    assert begin(site, NEW, 60 * MINUTE).events == ()
    (event,) = begin(site, other + "db = 0.2\n", 90 * MINUTE).events
    assert event.body["documents"] == [hashlib.sha256(NEW.encode()).hexdigest()]


def test_a_drift_that_does_not_cover_the_band_is_a_mistake_in_the_file(site: Site) -> None:
    narrow = NEW + FOUND + "table = [[1e9, 0.1], [2e9, 0.2]]\n"
    with pytest.raises(CalibrationError, match=r"as_found.table: covers 1 GHz to 2 GHz"):
        begin(site, narrow, 0)
    begin(site, OLD, 0)
    force = begin(site, narrow, MINUTE)
    (fault,) = force.events
    said: list[str] = []
    in_force(site, lambda f: calfile.chain(f, site.channels, site.bands), None, said.append)
    assert len(said) == 1
    assert "measuring on by the record's last calibration, 'roof-1, autumn'" in said[0]
    assert (fault.kind, fault.body["stands in"]) == (
        "fault", hashlib.sha256(OLD.encode()).hexdigest(),
    )  # fmt: skip


def test_an_empty_table_is_not_passed_over() -> None:
    """Every key of the example taken in but one hash sign: nobody is to think that it counts."""
    with pytest.raises(CalibrationError, match=r"as_found.date: missing"):
        parse(NEW.encode() + b"\n[as_found]\n")
