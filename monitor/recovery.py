"""What a starting daemon finds in the record: where it was, what stands, what is missing."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

from monitor.alarm_desk import AlarmDesk
from monitor.core import pipeline
from monitor.core.blocks import BLOCK_NS
from monitor.core.gather import Gathered, nothing, stack
from monitor.core.readings import empty_batch
from monitor.core.resume import resume, since_ns
from monitor.core.rows import count
from monitor.core.station import Station
from monitor.record import connect
from monitor.record.reader import Record
from monitor.record.types import ClockFix, Commit


@dataclass(frozen=True, slots=True)
class Recovered:
    """state, desk: as the run before left them. fixes: this boot's. rows: of this boot, not yet in
    the record. ended: (number, rows) of an earlier boot of the machine that was cut off."""

    state: pipeline.State
    desk: AlarmDesk = field(default_factory=AlarmDesk)
    fixes: list[ClockFix] = field(default_factory=list)
    rows: Gathered = field(default_factory=nothing)
    ended: tuple[int, Commit] | None = None


def recovered(path: Path, boot_id: str, kind: str, here: Station, boot_ns: int) -> Recovered:
    """A new boot has empty windows; so has one whose full disk does not let the record be read."""
    if not path.exists():
        return Recovered(pipeline.start(here, boot_ns))
    try:
        with Record.open(path) as record:
            return _from(record, boot_id, kind, here, boot_ns)
    except connect.DiskTroubleError:
        return Recovered(pipeline.start(here, boot_ns))


def _from(record: Record, boot_id: str, kind: str, here: Station, boot_ns: int) -> Recovered:
    boot = record.boot_number(boot_id, kind)
    desk = AlarmDesk.from_events(record.alarm_events(), -1 if boot is None else boot)
    last_ns = None if boot is None else record.last_reading_ns(boot)
    if boot is not None and last_ns is not None:
        rows, raw = record.resume(boot, since_ns(last_ns, here))
        state, missing = resume(here, rows, raw, boot_ns, desk.raised())
        return Recovered(state, desk, record.clock_fixes(boot), missing)
    ended = _cut_off(record, here, boot) if kind == "machine" else None
    return Recovered(pipeline.start(here, boot_ns, desk.raised()), desk, ended=ended)


def _cut_off(record: Record, here: Station, now: int | None) -> tuple[int, Commit] | None:
    """The last minute of the machine's boot before: blocks and windows that were never written."""
    boots = [boot.boot for boot in record.boots() if boot.kind == "machine" and boot.boot != now]
    last_ns = record.last_reading_ns(max(boots)) if boots else None
    if last_ns is None or len(record.channels()) != here.channels:
        return None
    rows, raw = record.resume(max(boots), since_ns(last_ns, here))
    state, out = resume(here, rows, raw, 0, frozenset())
    end_ns = last_ns + here.hold_ns
    closing = empty_batch(here.channels, -(-end_ns // BLOCK_NS) * BLOCK_NS)
    _, last = pipeline.step(state, closing, here)
    out.extend(last)
    blocks = stack(out.blocks)
    if blocks is None or not count(blocks):
        return None
    commit = Commit(
        blocks=blocks,
        windows=stack(out.windows),
        fields=stack(out.fields),
        exposures=stack(out.exposures),
        calibration=here.chain.identity,
    )
    return max(boots), commit
