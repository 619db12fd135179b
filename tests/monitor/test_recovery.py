"""A daemon that was killed, or a machine that lost its power: what the record holds afterwards."""

from __future__ import annotations

import sqlite3
from dataclasses import fields
from pathlib import Path

import numpy as np
import pytest

from monitor.core import pipeline
from monitor.core.gather import Gathered, nothing, stack
from monitor.core.readings import Batch
from monitor.core.rows import Event
from monitor.record import connect
from monitor.record.reader import Record
from monitor.record.types import Commit
from monitor.record.writer import Writer
from monitor.recovery import EVER_NS, Run, recovered, same_chain_since
from tests.core.stations import SCOPES, made

S = 1_000_000_000
HERE = made(2, temperature=((np.array([0.0, 40.0]), np.array([-2.0, 2.0])), None))


def batch(first_s: int, last_s: int) -> Batch:
    """Any counts, at a temperature that goes to and fro by 30 degrees in five minutes."""
    times = np.arange(first_s, last_s, dtype=np.int64) * S
    counts = np.random.default_rng(first_s).integers(-60_000, -10_000, (times.size, 2))
    warm = np.rint(200 + 150 * np.sin(np.arange(first_s, last_s) / 48)).astype(np.int32)
    flags = np.zeros(times.size, np.int32)
    return Batch(times, counts.astype(np.int32), flags, int(times[-1]), warm)


def killed(path: Path, boot_id: str, until_s: int, rows_until_s: int) -> Gathered:
    """A boot whose raw counts are kept to the end and whose rows only up to some time."""
    connect.ensure(path, False)
    writer = Writer(path, simulated=False)
    boot = writer.begin_boot(boot_id, "machine")
    writer.put_channels([(0, "x", "x", "all"), (1, "y", "y", "all")])
    writer.put_scopes(SCOPES)
    writer.commit(boot, Commit(events=(Event(0, "start", "daemon", {"chain": "one"}),)))
    state, out = pipeline.start(HERE, 0), nothing()
    for first in range(0, until_s, 10):
        part = batch(first, min(first + 10, until_s))
        state, found = pipeline.step(state, part, HERE)
        out.extend(found)
        kept = first < rows_until_s
        commit = [stack(getattr(found, name)) for name in ("blocks", "windows", "fields")]
        writer.commit(boot, Commit(part, *(commit if kept else (None, None, None))))
    writer.close()
    return out


def same(left: object, right: object) -> None:
    for field in fields(left):  # type: ignore[arg-type]
        a, b = getattr(left, field.name), getattr(right, field.name)
        assert a.tobytes() == b.astype(a.dtype).tobytes(), field.name


@pytest.mark.parametrize(("until_s", "rows_until_s"), [(2147, 2090), (2147, 2147), (45, 0), (7, 0)])
def test_within_a_boot_nothing_is_missing_afterwards(
    until_s: int, rows_until_s: int, tmp_path: Path
) -> None:
    path = tmp_path / "record.db"
    whole = killed(path, "a", until_s, rows_until_s)
    found = recovered(path, Run("a", "machine", 0, "one"), HERE)
    writer = Writer(path, simulated=False)
    boot = writer.begin_boot("a", "machine")
    writer.put_scopes(SCOPES)
    writer.commit(
        boot,
        Commit(blocks=stack(found.rows.blocks), windows=stack(found.rows.windows),
               fields=stack(found.rows.fields)),
    )  # fmt: skip
    writer.close()
    state, rest = pipeline.step(found.state, batch(until_s, until_s + 600), HERE)
    straight = pipeline.step(_straight(until_s), batch(until_s, until_s + 600), HERE)[1]
    with Record.open(path) as record:
        for kind in ("blocks", "windows", "fields"):
            expected = stack(getattr(whole, kind))
            if expected is not None:
                same(getattr(record, kind)(boot), expected)
            left, right = stack(getattr(rest, kind)), stack(getattr(straight, kind))
            assert left is not None
            assert right is not None
            same(left, right)
    assert state.last_ns == (until_s + 599) * S


def _straight(until_s: int) -> pipeline.State:
    state = pipeline.start(HERE, 0)
    for first in range(0, until_s, 10):
        state, _ = pipeline.step(state, batch(first, min(first + 10, until_s)), HERE)
    return state


def test_the_last_minute_of_a_boot_that_was_cut_off_is_made_good(tmp_path: Path) -> None:
    path = tmp_path / "record.db"
    whole = killed(path, "a", 2147, 2090)
    found = recovered(path, Run("b", "machine", 0, "one"), HERE)
    assert found.state.history.n.sum() == 0  # a new boot has empty windows
    assert found.ended is not None
    number, commit = found.ended
    writer = Writer(path, simulated=False)
    writer.put_scopes(SCOPES)
    writer.commit(number, commit)
    writer.close()
    with Record.open(path) as record:
        blocks, expected = record.blocks(number), stack(whole.blocks)
    assert expected is not None
    n = expected.start_ns.size
    assert blocks.energy_w_ns[:n].tobytes() == expected.energy_w_ns.tobytes()
    assert int(blocks.covered_ns.sum()) == 2 * (2146 + 3) * S  # the last reading holds 3 s


def test_refilled_windows_are_corrected_for_each_readings_temperature(tmp_path: Path) -> None:
    """A run that forgot the temperatures would go on with windows that read otherwise."""
    path = tmp_path / "record.db"
    killed(path, "a", 2147, 2090)
    found = recovered(path, Run("a", "machine", 0, "one"), HERE)
    plain = recovered(path, Run("a", "machine", 0, "one"), made(2))
    live, forgot = (pipeline.live(one.state, 360, HERE).energy_low for one in (found, plain))
    straight = pipeline.live(_straight(2147), 360, HERE).energy_low
    assert live.tobytes() == straight.tobytes()
    assert live[0, 0] != forgot[0, 0]
    assert live[0, 1] == forgot[0, 1]


def test_a_record_that_is_not_there_yet_is_a_new_boot(tmp_path: Path) -> None:
    found = recovered(tmp_path / "none.db", Run("a", "machine", 5 * S, "one"), HERE)
    assert found.state.front_ns == 5 * S
    assert found.ended is None


def test_power_of_another_calibration_is_not_refilled(tmp_path: Path) -> None:
    """Blocks hold power at the port: weighed by another antenna they would be another field."""
    path = tmp_path / "record.db"
    killed(path, "a", 2147, 2090)
    found = recovered(path, Run("a", "machine", 3000 * S, "two"), HERE)
    assert found.state.history.n.sum() == 0
    assert found.state.front_ns == 3000 * S
    assert "calibration" in found.trouble
    assert not found.rows.blocks
    assert recovered(path, Run("b", "machine", 0, "two"), HERE).ended is None


def test_the_same_chain_counts_back_to_where_it_began() -> None:
    assert same_chain_since([], "a") is None
    assert same_chain_since([(1, "a"), (5, "b")], "a") is None
    assert same_chain_since([(1, "a"), (5, "a")], "a") == EVER_NS
    assert same_chain_since([(1, "b"), (5, "a"), (9, "a")], "a") == 5


def test_a_damaged_row_costs_the_windows_and_not_the_start(tmp_path: Path) -> None:
    path = tmp_path / "record.db"
    killed(path, "a", 2147, 2147)
    db = sqlite3.connect(path)
    db.execute("UPDATE raw SET body = x'0102' WHERE seq = (SELECT max(seq) - 3 FROM raw)")
    db.commit()
    db.close()
    for boot_id in ("a", "b"):
        found = recovered(path, Run(boot_id, "machine", 3000 * S, "one"), HERE)
        assert found.state.front_ns == 3000 * S
        assert "damaged" in found.trouble
