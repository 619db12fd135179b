"""Flags of the daemon: the age of the calibration, and another device than the calibrated one."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from dashboard.reservations import days_left, sentences
from monitor.core.exposure import OUTSIDE_BUDGET
from monitor.core.flags import Flag
from monitor.core.readings import Batch, DeviceStatus
from monitor.marking import DAY_NS, DUE_SOON_DAYS, Standing, marked
from tests.core.stations import chain
from tests.core.stations import made as station_made
from tests.monitor.fakes import Desk

DUE_NS = 1_800_000_000_000_000_000
OFFSET_NS = DUE_NS - 100 * DAY_NS
"""UTC less boot time: the calibration is due on the boot's 100th day."""
SOON, OVERDUE = int(Flag.CALIBRATION_DUE_SOON), int(Flag.CALIBRATION_OVERDUE)


def flags(days: list[float], name: str = "", **more: object) -> list[int]:
    """The flags of readings at these days of the boot, without those of the temperature."""
    times = np.array([round(day * DAY_NS) for day in days], np.int64)
    none = np.zeros(times.size, np.int32)
    batch = Batch(times, none[:, None], none, int(times[-1]))
    said = {"simulated": False, "synchronised": True, "offset_ns": OFFSET_NS} | more
    here = replace(chain(1), due_utc_ns=DUE_NS)
    found = marked(batch, DeviceStatus(True, "", 20.0, name=name), here, **said)  # type: ignore[arg-type]
    assert found.flags.dtype == np.int32
    return [int(bits) for bits in found.flags]


def test_a_calibration_is_announced_sixty_days_ahead_and_overdue_after_its_day() -> None:
    assert DUE_SOON_DAYS == 60
    second = 1 / 86_400
    ends = [39.9, 40.0, 40.0 + second, 100.0, 100.0 + second]
    assert flags(ends) == [0, 0, SOON, SOON, OVERDUE]


def test_without_a_known_time_nothing_is_said_of_the_age() -> None:
    assert flags([90.0, 110.0], offset_ns=None) == [0, 0]


def test_a_notice_forbids_nothing_and_an_element_changed_does() -> None:
    assert not OUTSIDE_BUDGET & Flag.CALIBRATION_DUE_SOON
    assert OUTSIDE_BUDGET & Flag.ELEMENT_CHANGED


@pytest.mark.parametrize(
    ("says", "calibrated", "changed"),
    [
        ("roof-1", {"roof-1"}, False),
        ("roof-2", {"roof-1"}, True),
        ("roof-2", {"roof-1", "roof-2"}, False),
        ("roof-2", set(), False),
        ("", {"roof-1"}, False),
    ],
)
def test_another_board_than_the_calibrated_one_is_an_element_changed(
    says: str, calibrated: set[str], changed: bool
) -> None:
    found = flags([1.0], says, standing=Standing(0, frozenset(calibrated)))
    assert found == [int(Flag.ELEMENT_CHANGED) if changed else 0]


def test_what_stands_for_a_run_is_on_every_reading_and_in_the_figures() -> None:
    here = station_made(1)
    desk = Desk(here)
    desk.daemon._standing = Standing(int(Flag.ELEMENT_CHANGED))  # noqa: SLF001
    desk.feed(range(1, 41), [-40_000] * 40)
    assert "an element was changed without a new calibration" in desk.now()["flags"]
    kept = [commit.raw for commit in desk.writer.commits if commit.raw is not None]
    assert kept
    assert all((batch.flags & int(Flag.ELEMENT_CHANGED)).all() for batch in kept)


def test_the_days_that_are_left_are_told_and_shown() -> None:
    here = station_made(1)
    due_ns = 1_700_000_000 * 1_000_000_000 + 20 * DAY_NS  # the fake clock's UTC and 20 days
    here = replace(here, chain=replace(here.chain, due_utc_ns=due_ns))
    desk = Desk(here)
    desk.feed(range(1, 41), [-40_000] * 40)
    now = desk.now()
    assert now["calibration"]["days_left"] == 19
    assert "calibration due soon" in now["flags"]
    said = sentences(now["flags"], days_left(now))
    assert [line.split(":")[0] for line in said if "due" in line] == ["Calibration due in 19 days"]
