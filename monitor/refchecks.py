"""Reference checks on site: a known level is applied, and what the record says of it is kept."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from monitor.alarm_desk import text_of
from monitor.core.blocks import BLOCK_NS
from monitor.core.errors import ConfigError, RecordError
from monitor.core.flags import Flag, words
from monitor.core.quantities import dbm_from_w
from monitor.core.readings import NS_PER_S
from monitor.core.rows import BlockRows, Event
from monitor.record.reader import Record
from monitor.record.types import Boot
from monitor.times import text_of as utc_text
from monitor.times import utc_ns_of

KIND = "reference check"
PLACES = ("port", "input")
"""Where the level was applied: the detector's port, or the input of the chain."""
UNUSABLE = Flag.NO_SIGNAL_WIRE | Flag.BELOW_RANGE | Flag.ABOVE_RANGE | Flag.CLIPPED
LEAST_VALID = 0.5
"""Part of the time that must have readings (our choice)."""
LOOK_BACK_NS = 3600 * NS_PER_S
MOST_EVENTS = 1 << 40
MOST = 1e9
"""No level in dBm and no time in s of a check is larger."""
NUMBERS = ("applied_dbm", "mean_dbm", "lowest_dbm", "highest_dbm", "valid_s")


@dataclass(frozen=True, slots=True)
class Mean:
    """The mean power of a channel over whole blocks, in the boot's time and in UTC (None: not
    known); lowest_dbm, highest_dbm: of the readings. count_table: SHA-256 of what made them."""

    boot: Boot
    start_ns: int
    end_ns: int
    mean_dbm: float
    lowest_dbm: float
    highest_dbm: float
    valid_s: float
    count_table: str


@dataclass(frozen=True, slots=True)
class Check:
    """One reference check as kept. number: in the order of keeping, from 1; struck: why it was
    struck out, None where it stands."""

    number: int

    channel: str
    at: str
    from_utc: str
    to_utc: str
    applied_dbm: float
    mean_dbm: float
    count_table: str
    note: str
    struck: str | None = None

    @property
    def difference_db(self) -> float:
        """By how much the chain read too high."""
        return self.mean_dbm - self.applied_dbm


def mean_of(record: Record, channel: str, span: tuple[int, int] | None, last_ns: int) -> Mean:
    """The mean over [start, end) of UTC ns, or over the last_ns before the newest block.

    ConfigError where there is no such channel, too little of the time has readings, or the readings
    were outside the detector's range.
    """
    names = [row.name for row in record.channels()]
    if channel not in names:
        raise ConfigError(f"channel {channel!r}: the record has {', '.join(names) or 'none'}")
    boot, rows, (start_ns, end_ns) = _blocks(record, names.index(channel), span, last_ns)
    covered_ns = int(rows.covered_ns.sum())
    if covered_ns < LEAST_VALID * (end_ns - start_ns) or not covered_ns:
        raise ConfigError(
            f"channel {channel!r}: only {covered_ns / NS_PER_S:.3g} s of "
            f"{(end_ns - start_ns) / NS_PER_S:.3g} s have readings; the record lags up to a minute "
            "behind: wait, or give --from and --to"
        )
    bits = int(np.bitwise_or.reduce(rows.flags)) & int(UNUSABLE)
    if bits:
        raise ConfigError(
            f"channel {channel!r}: {', '.join(words(bits))}; apply a level within the range"
        )
    powers_w = rows.energy_w_ns.sum() / covered_ns, rows.min_w.min(), rows.max_w.max()
    mean, low, high = (_dbm(float(power_w)) for power_w in powers_w)
    table = _count_table(record, boot, end_ns, channel)
    return Mean(boot, start_ns, end_ns, mean, low, high, covered_ns / NS_PER_S, table)


def _dbm(power_w: float) -> float:
    if not power_w > 0.0:
        raise ConfigError("a power of nothing was read; apply a level within the range")
    return dbm_from_w(power_w)


Found = tuple[Boot, BlockRows, tuple[int, int]]


def _blocks(record: Record, index: int, span: tuple[int, int] | None, last_ns: int) -> Found:
    """The blocks of the channel that lie wholly in the span, and the span in the boot's time."""
    found: list[Found] = []
    for boot in record.boots():
        if span is None:
            last = record.last_reading_ns(boot.boot)
            rows = _of(record.blocks(boot.boot, (last or 0) - LOOK_BACK_NS), index)
            if last is not None and rows.start_ns.size:
                end_ns = int(rows.start_ns.max()) + BLOCK_NS
                found = [(boot, rows, (end_ns - last_ns, end_ns))]
        elif boot.utc_offset_ns is not None:
            start_ns, end_ns = (limit - boot.utc_offset_ns for limit in span)
            rows = _of(record.blocks(boot.boot, start_ns, end_ns), index)
            if rows.start_ns.size:
                found.append((boot, rows, (start_ns, end_ns)))
    if len(found) != 1:
        what = "several boots of the box" if found else "no block of ten seconds"
        raise ConfigError(f"{what} in that time; see fieldsill averages for what there is")
    boot, rows, (start_ns, end_ns) = found[0]
    whole = (rows.start_ns >= start_ns) & (rows.start_ns + BLOCK_NS <= end_ns)
    return boot, _kept(rows, whole), (start_ns, end_ns)


def _of(rows: BlockRows, index: int) -> BlockRows:
    return _kept(rows, rows.channel == index)


def _kept(rows: BlockRows, keep: np.ndarray) -> BlockRows:
    return BlockRows(*(getattr(rows, name)[keep] for name in BlockRows.__slots__))


def _count_table(record: Record, boot: Boot, end_ns: int, channel: str) -> str:
    uses = [
        use for use in record.calibrations().uses if use.boot == boot.boot and use.boot_ns <= end_ns
    ]
    return uses[-1].hashes.get(f"counts {channel}", "") if uses else ""


def request_of(
    mean: Mean, channel: str, at: str, applied_dbm: float, note: str
) -> dict[str, object]:
    """What the daemon is asked to keep; event_of makes the event of it."""
    offset = mean.boot.utc_offset_ns
    ends = (
        None if offset is None else utc_text(ns + offset) for ns in (mean.start_ns, mean.end_ns)
    )
    first, last = ends
    return {
        "do": KIND, "channel": channel, "at": at, "applied_dbm": applied_dbm,
        "mean_dbm": mean.mean_dbm, "lowest_dbm": mean.lowest_dbm, "highest_dbm": mean.highest_dbm,
        "valid_s": mean.valid_s, "from_utc": first or "", "to_utc": last or "",
        "count_table": mean.count_table, "note": note,
    }  # fmt: skip


def event_of(request: Mapping[str, object], channels: Sequence[str], now_ns: int) -> Event:
    """The event of a request; ConfigError where it cannot be kept."""
    channel = text_of(request, "channel", 200)
    at = text_of(request, "at", 10)
    if channel not in channels or at not in PLACES:
        raise ConfigError(f"channel {channel!r} at {at!r}: no such channel or place")
    body: dict[str, object] = {"at": at}
    for key in NUMBERS:
        value = request.get(key)
        number = isinstance(value, (int, float)) and not isinstance(value, bool)
        if not number or not abs(value) <= MOST:  # type: ignore[arg-type]
            raise ConfigError(f"{key}: {value!r} is not a number, or beyond {MOST:g}")
        body[key] = float(value)  # type: ignore[arg-type]
    for key, longest in (("from_utc", 40), ("to_utc", 40), ("count_table", 64), ("note", 2000)):
        body[key] = text_of(request, key, longest, "")
    for key in ("from_utc", "to_utc"):
        _refuse_no_time(key, str(body[key]))
    off_db = float(body["mean_dbm"]) - float(body["applied_dbm"])  # type: ignore[arg-type]
    text = f"{body['applied_dbm']:.2f} dBm applied, read {off_db:+.2f} dB otherwise"
    body |= {"difference_db": off_db, "text": f"{text}; {body['note']}" if body["note"] else text}
    return Event(now_ns, KIND, channel, body)


def _refuse_no_time(key: str, text: str) -> None:
    """ConfigError: the chart, which goes by it, could not be read any more."""
    try:
        utc_ns_of(text or "1970-01-01T00:00:00Z")
    except ValueError as error:
        raise ConfigError(f"{key}: {error}") from None


def checks_of(record: Record) -> list[Check]:
    """Every reference check of a record, in the order of time; RecordError for one that is none."""
    events = record.events(limit=MOST_EVENTS, rare=KIND)
    try:
        found = [_check(i, event.name, event.body) for i, event in enumerate(events, 1)]
        return sorted(found, key=lambda check: utc_ns_of(check.to_utc) if check.to_utc else 0)
    except (KeyError, ValueError) as error:
        raise RecordError(
            f"{record.path}: a reference check in it cannot be read: {error}; restore a copy"
        ) from error


def _check(number: int, channel: str, body: Mapping[str, object]) -> Check:
    applied_dbm, mean_dbm = (float(str(body[key])) for key in ("applied_dbm", "mean_dbm"))
    if not math.isfinite(mean_dbm - applied_dbm):
        raise ValueError(f"{mean_dbm} dBm read, {applied_dbm} dBm applied")
    from_utc, to_utc, at, table, note = (
        str(body[key]) for key in ("from_utc", "to_utc", "at", "count_table", "note")
    )
    return Check(number, channel, at, from_utc, to_utc, applied_dbm, mean_dbm, table, note)
