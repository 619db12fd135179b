"""The daemon on a live line: killed and started again, a device that hangs, leaves and returns."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from monitor import control, wiring
from monitor.config import load_site
from monitor.core import pipeline
from monitor.core.gather import nothing, stack
from monitor.record.reader import Record
from tests.system.commands import wait_for
from tests.system.desk import Desk, live


@pytest.fixture
def desk(tmp_path: Path) -> Iterator[Desk]:
    with live(tmp_path, tmp_path) as made:
        yield made


def test_killed_and_started_again_within_a_boot_the_windows_go_on(desk: Desk) -> None:
    with desk.measuring() as daemon:
        wait_for(lambda: desk.readings() >= 100 if (desk.folder / "record.db").exists() else 0)
        daemon.kill()
        daemon.wait()
    before = desk.readings()
    with desk.measuring():
        seen = wait_for(lambda: desk.now() if desk.readings() > before + 50 else None)
    assert isinstance(seen, dict)
    six = next(row for row in seen["fields"] if row["averaging_s"] == 360)
    assert six["valid_share"] * 360 > 14  # both runs are in the window
    site = load_site(desk.folder / "site.toml")
    here = wiring.station_for(site, wiring.chain_for(site, wiring.sensor_settings(site)))
    with Record.open(desk.folder / "record.db") as record:
        (boot,) = record.boots()
        assert boot.kind == "machine"
        kept = record.blocks(boot.boot)
        batches = [batch for batch in record.raw_batches(boot.boot) if batch.n]
    state, out = pipeline.start(here, int(batches[0].times_ns[0])), nothing()
    for batch in batches:
        state, found = pipeline.step(state, batch, here)
        out.extend(found)
    again = stack(out.blocks)
    assert again is not None
    shared = min(kept.start_ns.size, again.start_ns.size)
    assert shared >= 3
    np.testing.assert_array_equal(kept.start_ns[:shared], again.start_ns[:shared])
    assert kept.energy_w_ns[:shared].tobytes() == again.energy_w_ns[:shared].tobytes()


def test_a_hung_device_is_an_alarm_and_its_return_is_seen(desk: Desk) -> None:
    def silence() -> str | None:
        alarms = {alarm["key"]: alarm["state"] for alarm in desk.now().get("alarms", [])}
        return alarms.get("silence")

    with desk.measuring():
        wait_for(lambda: (desk.now().get("last_reading_age_s") or 9) < 2)
        desk.fault("hang")
        wait_for(lambda: silence() == "unacknowledged", 15)
        wait_for(lambda: not desk.now()["device"]["connected"], 15)
        desk.fault("return")
        wait_for(lambda: silence() == "returned_unacknowledged", 40)
        control.ask(desk.folder / "record.sock", {"do": "acknowledge", "key": "silence"})
        wait_for(lambda: silence() is None)
    with Record.open(desk.folder / "record.db") as record:
        kinds = [(event.kind, event.name) for event in record.events()]
    assert kinds.count(("alarm", "silence")) == 2
    assert ("confirmed", "silence") in kinds


def test_a_device_that_vanishes_and_returns_is_picked_up_again(desk: Desk) -> None:
    with desk.measuring():
        wait_for(lambda: (desk.now().get("last_reading_age_s") or 9) < 2)
        desk.fault("vanish")
        wait_for(lambda: not desk.now()["device"]["connected"], 15)
        desk.fault("return")
        wait_for(lambda: desk.now()["device"]["connected"], 40)
        wait_for(lambda: (desk.now().get("last_reading_age_s") or 9) < 2)


def test_damaged_frames_are_counted_and_nothing_false_is_recorded(desk: Desk) -> None:
    with desk.measuring():
        wait_for(lambda: (desk.now().get("last_reading_age_s") or 9) < 2)
        before = dict(desk.now()["device"]["counters"])
        desk.fault("corrupt", "--count", 5)
        desk.fault("drop", "--count", 5)

        def counted() -> bool:
            counters = desk.now()["device"]["counters"]
            more = {name: counters[name] - before.get(name, 0) for name in counters}
            return sum(more[name] for name in more if name != "readings") >= 6

        wait_for(counted)
    with Record.open(desk.folder / "record.db") as record:
        (boot,) = record.boots()
        counts = np.concatenate([batch.counts for batch in record.raw_batches(boot.boot)])
    assert counts.min() >= 0
    assert counts.max() < 4096
