"""What a starting daemon finds in the record: where it was, what stands, what is missing."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, fields
from pathlib import Path

from monitor.alarm_desk import AlarmDesk
from monitor.core import pipeline
from monitor.core.blocks import BLOCK_NS
from monitor.core.errors import RecordError
from monitor.core.gather import Gathered, nothing, stack
from monitor.core.readings import Batch, empty_batch
from monitor.core.resume import resume, since_ns
from monitor.core.rows import BlockRows, count
from monitor.core.station import Station
from monitor.record.reader import Record
from monitor.record.types import ClockFix, Commit

EVER_NS = -(2**62)


@dataclass(frozen=True, slots=True)
class Recovered:
    """state, desk: as the run before left them. fixes: this boot's. rows: of this boot, not yet in
    the record. ended: (number, rows) of an earlier boot of the machine that was cut off.
    trouble: why windows begin empty although there was something to go on from."""

    state: pipeline.State
    desk: AlarmDesk = field(default_factory=AlarmDesk)
    fixes: list[ClockFix] = field(default_factory=list)
    rows: Gathered = field(default_factory=nothing)
    ended: tuple[int, Commit] | None = None
    trouble: str = ""


@dataclass(frozen=True, slots=True)
class Run:
    """The run that starts: its boot's identity and kind, the time now, its chain's identity."""

    boot_id: str
    kind: str
    boot_ns: int
    chain: str


def recovered(path: Path, run: Run, here: Station) -> Recovered:
    """A new boot has empty windows; so has a run that cannot read the one before, or that weighs
    the same power otherwise."""
    if not path.exists():
        return Recovered(pipeline.start(here, run.boot_ns))
    desk = AlarmDesk()
    try:
        with Record.open(path) as record:
            boot = record.boot_number(run.boot_id, run.kind)
            desk = AlarmDesk.from_events(record.alarm_events(), -1 if boot is None else boot)
            return _from(record, boot, run, here, desk)
    except RecordError as error:  # measuring does not wait for a record that cannot be read
        state = pipeline.start(here, run.boot_ns, desk.raised())
        return Recovered(state, desk, trouble=str(error))


def _from(record: Record, boot: int | None, run: Run, here: Station, desk: AlarmDesk) -> Recovered:
    last_ns = None if boot is None else record.last_reading_ns(boot)
    if boot is None or last_ns is None:
        ended = _cut_off(record, here, boot, run.chain) if run.kind == "machine" else None
        return Recovered(pipeline.start(here, run.boot_ns, desk.raised()), desk, ended=ended)
    same_ns = same_chain_since(record.starts(boot), run.chain)
    if same_ns is None:
        start_ns = max(run.boot_ns, last_ns + here.hold_ns)
        state = pipeline.start(here, start_ns, desk.raised())
        trouble = "another calibration, band or element than in the run before"
        return Recovered(state, desk, record.clock_fixes(boot), trouble=trouble)
    rows, raw = _kept(record, boot, last_ns, here, same_ns)
    state, missing = resume(here, rows, raw, run.boot_ns, desk.raised())
    return Recovered(state, desk, record.clock_fixes(boot), missing)


def same_chain_since(starts: Sequence[tuple[int, str]], chain: str) -> int | None:
    """From when on power has been weighed as chain does; None where the last run did otherwise.

    starts: (boot_ns, identity of the chain) of each run, in order.
    """
    if not starts or starts[-1][1] != chain:
        return None
    for (_, before), (boot_ns, _) in zip(reversed(starts[:-1]), reversed(starts)):
        if before != chain:
            return boot_ns
    return EVER_NS


def _kept(
    record: Record, boot: int, last_ns: int, here: Station, same_ns: int
) -> tuple[BlockRows, list[Batch]]:
    """What the record holds of the last windows, made by the same chain."""
    rows, raw = record.resume(boot, since_ns(last_ns, here))
    keep = rows.start_ns >= same_ns
    rows = BlockRows(*(getattr(rows, column.name)[keep] for column in fields(rows)))
    return rows, [batch.part(batch.times_ns >= same_ns, batch.now_ns) for batch in raw]


def _cut_off(
    record: Record, here: Station, now: int | None, chain: str
) -> tuple[int, Commit] | None:
    """The last minute of the machine's boot before: blocks and windows that were never written."""
    boots = [boot.boot for boot in record.boots() if boot.kind == "machine" and boot.boot != now]
    last_ns = record.last_reading_ns(max(boots)) if boots else None
    if last_ns is None or len(record.channels()) != here.channels:
        return None
    same_ns = same_chain_since(record.starts(max(boots)), chain)
    if same_ns is None:
        return None
    rows, raw = _kept(record, max(boots), last_ns, here, same_ns)
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
