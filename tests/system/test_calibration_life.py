"""A box whose calibration file breaks or changes under it: data are kept, nothing conforms."""

from __future__ import annotations

import json
import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest

from monitor.core.flags import Flag
from monitor.record.reader import Record
from monitor.record.types import EventRow
from tests.system.commands import fieldsill, filled, start, wait_for
from tests.system.desk import DATA, Desk, live


@pytest.fixture
def desk(tmp_path: Path) -> Iterator[Desk]:
    """A box whose calibration file lies beside its site file."""
    with live(tmp_path, tmp_path) as made:
        shutil.copy(DATA / "board-calibration.toml", tmp_path / "calibration.toml")
        site = tmp_path / "site.toml"
        here = str(tmp_path / "calibration.toml")
        site.write_text(filled(site.read_text(), {str(DATA / "board-calibration.toml"): here}))
        yield made


def run(desk: Desk) -> tuple[dict, int]:
    """The box's document once readings of a new run came, and how many came in it."""
    path = desk.disk / "record.db"
    before = desk.readings() if path.exists() else 0
    with desk.measuring():
        wait_for(lambda: path.exists() and desk.readings() > before + 20)
        now = desk.now()
    return now, desk.readings() - before


def events(desk: Desk, kind: str) -> list[EventRow]:
    with Record.open(desk.disk / "record.db") as record:
        return [event for event in record.events() if event.kind == kind]


def last_flags(desk: Desk) -> int:
    """The flags of the last reading in the record."""
    with Record.open(desk.disk / "record.db") as record:
        boot = record.boots()[-1].boot
        return int([b for b in record.raw_batches(boot) if b.n][-1].flags[-1])


@pytest.mark.parametrize("spoiled", ["[calibration]\nid = ", None, "number in Kelvin"])
def test_a_box_with_a_record_measures_on_without_a_calibration_file(
    desk: Desk, spoiled: str | None, capfd: pytest.CaptureFixture[str]
) -> None:
    run(desk)
    assert not last_flags(desk) & Flag.CALIBRATION_OVERDUE
    good = desk.folder / "calibration.toml"
    whole = good.read_text()
    good.unlink() if spoiled is None else good.write_text(spoiled)
    capfd.readouterr()
    now, came = run(desk)
    assert came > 20
    assert capfd.readouterr().err.count("measuring on by the record's last calibration") == 1
    checked = fieldsill("check", "--site", desk.folder / "site.toml", "--listen", "0")
    assert checked.returncode in (2, 3)
    assert "a run would go on by the record's last calibration" in checked.stderr
    assert "as if overdue: nothing conforms" in checked.stderr
    assert checked.stderr.count("\n") == 1
    assert "calibration overdue" in now["flags"]
    assert "conforms" not in {row["verdict"] for row in now["exposures"]}
    assert last_flags(desk) & Flag.CALIBRATION_OVERDUE
    fault = events(desk, "fault")[0]
    assert fault.name == "calibration file"
    assert "calibration.toml" in str(fault.body["why"])
    starts = events(desk, "start")
    assert {event.body["calibration"] for event in starts} == {fault.body["stands in"]}
    if spoiled is None:  # so does the command that starts both halves
        both = start("run", "--site", desk.folder / "site.toml")
        try:
            wait_for(lambda: (desk.now().get("device") or {}).get("connected"))
        finally:
            both.terminate()
            assert both.wait(40) == 0
    good.write_text(whole)
    run(desk)
    assert not last_flags(desk) & Flag.CALIBRATION_OVERDUE
    assert len(events(desk, "fault")) == (2 if spoiled is None else 1)


def test_a_first_start_without_a_calibration_file_refuses(desk: Desk) -> None:
    (desk.folder / "calibration.toml").unlink()
    for command in ("measure", "run", "check"):
        done = fieldsill(command, "--site", desk.folder / "site.toml")
        assert done.returncode == 3, command
        assert "calibration.toml" in done.stderr
        assert "go on by" not in done.stderr
    assert not (desk.disk / "record.db").exists()


def test_an_antenna_changed_under_its_old_certificate_is_on_every_figure(desk: Desk) -> None:
    path = desk.folder / "calibration.toml"
    text = path.read_text()
    run(desk)
    assert not last_flags(desk) & Flag.ELEMENT_CHANGED
    serial = text.split("[[element]]")[1].split('serial = "')[1].split('"')[0]
    path.write_text(text.replace(f'serial = "{serial}"', 'serial = "other"', 1))
    for _ in range(2):  # a restart does not forget it
        now, _ = run(desk)
        assert "an element was changed without a new calibration" in now["flags"]
    said = [event for event in events(desk, "calibration") if event.name == "element changed"]
    assert len(said) == 2
    assert "other stands under certificate" in str(said[0].body["what"])
    checked = fieldsill("check", "--site", desk.folder / "site.toml", "--listen", "0")
    assert "other stands under certificate" in checked.stdout
    path.write_text(text)
    run(desk)
    assert not last_flags(desk) & Flag.ELEMENT_CHANGED


def test_another_board_or_part_than_the_calibrated_one_is_seen(desk: Desk) -> None:
    path, site = desk.folder / "calibration.toml", desk.folder / "site.toml"
    text = path.read_text()
    path.write_text(text.replace('kind = "log"', 'kind = "log"\nserial = "rehearsal-board"', 1))
    assert path.read_text() != text
    run(desk)
    assert not last_flags(desk) & Flag.ELEMENT_CHANGED
    path.write_text(text.replace('kind = "log"', 'kind = "log"\nserial = "another"', 1))
    run(desk)
    assert last_flags(desk) & Flag.ELEMENT_CHANGED
    heard = fieldsill("check", "--site", site, "--listen", "1").stdout
    assert "the device calls itself rehearsal-board, calibrated was another" in heard
    path.write_text(text)
    run(desk)
    assert not last_flags(desk) & Flag.ELEMENT_CHANGED
    site.write_text(site.read_text() + '\n[[installed]]\ntype = "antenna"\nserial = "A-99"\n')
    run(desk)
    assert last_flags(desk) & Flag.ELEMENT_CHANGED
    checked = fieldsill("check", "--site", site, "--listen", "0")
    assert "note  installed" in checked.stdout
    assert "A-99 is in place" in checked.stdout


def test_a_reference_check_goes_through_the_daemon_and_after_it_into_the_file(desk: Desk) -> None:
    record = desk.disk / "record.db"
    asked = ["calibration", "applied", "--record", record, "--channel", "x", "--json"]
    with desk.measuring():  # its end writes the blocks that it has, sooner than their minute
        wait_for(lambda: span_s(desk) > 21, 60)
    assert blocks(desk) >= 1
    with desk.measuring():
        wait_for(lambda: desk.now().get("boot_ns"))
        live_one = json.loads(fieldsill(*asked, "--level", "-30dBm", "--last", "10s").stdout)
        assert live_one["kept_by"] == "daemon"
        wait_for(lambda: len(events(desk, "reference check")) == 1)
    after = json.loads(fieldsill(*asked, "--level", "-31dBm", "--last", "10s").stdout)
    assert after["kept_by"] == "command"
    first, second = events(desk, "reference check")
    for event, told in ((first, live_one), (second, after)):
        assert event.name == "x"
        assert event.body["difference_db"] == pytest.approx(told["mean_dbm"] - told["applied_dbm"])
        assert event.body["count_table"] == told["count_table"] != ""
    charted = json.loads(fieldsill("calibration", "chart", "--record", record, "--json").stdout)
    assert [row["applied_dbm"] for row in charted["charts"][0]["checks"]] == [-30.0, -31.0]
    # the simulated field, not a generator, was read: the difference tells of a slip
    assert not any("not compared" in note for note in after["notes"])
    assert any("look for a wrong level, channel or cable" in note for note in after["notes"])
    shown = json.loads(fieldsill("calibration", "show", "--record", record, "--json").stdout)
    assert shown["identity"] == events(desk, "start")[0].body["calibration"]


def span_s(desk: Desk) -> float:
    """How long the raw counts in the record reach."""
    if not (desk.disk / "record.db").exists():
        return 0.0
    with Record.open(desk.disk / "record.db") as record:
        times = [
            t for b in record.boots() for raw in record.raw_batches(b.boot) for t in raw.times_ns
        ]
    return float(times[-1] - times[0]) / 1e9 if times else 0.0


def blocks(desk: Desk) -> int:
    """Blocks of the first channel in the record."""
    with Record.open(desk.disk / "record.db") as record:
        return sum(int((record.blocks(b.boot).channel == 0).sum()) for b in record.boots())
