"""The detector board's lines (PROTOCOL.md): bytes in, whole and checked frames out. Pure."""

from __future__ import annotations

import re
from binascii import crc_hqx
from typing import NamedTuple

from monitor.core.readings import MISSING

LONGEST_LINE = 200
"""Bytes of a line, its LF included."""

_COUNT = rb"(?:-?\d{1,9}|-)"


def _samples(channels: int) -> bytes:
    one = b",".join([_COUNT] * channels)
    return b"%d %s(?:;%s)*" % (channels, one, one)


_FRAME = re.compile(
    rb"FS1 (\d{1,5}) (\d{1,15}) (?=([123]) ([^ ]+) )(?:%s) (-|-?\d{1,4}) (-|\d{1,5})"
    % b"|".join(_samples(channels) for channels in (1, 2, 3))
)
_BANNER = re.compile(
    rb"FSB ([\w.-]{1,24}) ([\w.-]{1,24}) ([123]) (\d{1,7}) (\d{1,2}) (real|simulated)"
)


class Frame(NamedTuple):
    """One frame as sent. tick_ms: at its last sample. counts: the field, undecoded."""

    body: bytes
    seq: int
    tick_ms: int
    channels: int
    counts: bytes
    temperature: bytes
    supply: bytes

    @property
    def samples(self) -> int:
        """Number of samples in the frame, 1 or more."""
        return self.counts.count(b";") + 1


class Banner(NamedTuple):
    """What the board says of itself. spacing_ms: between samples, 0 where not constant."""

    name: str
    firmware: str
    channels: int
    spacing_ms: int
    bits: int
    simulated: bool


def crc(data: bytes) -> int:
    """CRC-16, polynomial 0x1021, start 0xFFFF, not reflected; 0x29B1 for b'123456789'."""
    return crc_hqx(data, 0xFFFF)


def decode_counts(fields: list[bytes]) -> list[int]:
    """Counts of the COUNTS fields in their order, MISSING where a board sent '-'."""
    tokens = b",".join(fields).replace(b";", b",").split(b",")
    try:
        return list(map(int, tokens))
    except ValueError:
        return [MISSING if token == b"-" else int(token) for token in tokens]


class FrameParser:
    """Cuts a stream of bytes into frames and banners, whatever the cuts between feeds.

    counters: what was thrown away, by its kind.
    """

    def __init__(self) -> None:
        self.counters = dict.fromkeys(
            ("partial", "garbage", "bad_checksum", "malformed", "too_long"), 0
        )
        self._rest = b""
        self._dropping = False

    def restart(self) -> None:
        """Forget the unfinished line: the stream that comes is another one."""
        if self._rest:
            self.counters["partial"] += 1
        self._rest = b""
        self._dropping = False

    def feed(self, data: bytes) -> list[Frame | Banner]:
        """The frames and banners that these bytes complete, in their order."""
        lines = (self._rest + data).split(b"\n")
        self._rest = lines.pop()
        found: list[Frame | Banner] = []
        for line in lines:
            if self._dropping:
                self._dropping = False
            elif len(line) >= LONGEST_LINE:
                self.counters["too_long"] += 1
            else:
                self._line(line, found)
        self._bound_rest()
        return found

    def _bound_rest(self) -> None:
        if self._dropping:
            self._rest = b""
        elif len(self._rest) >= LONGEST_LINE:
            self.counters["too_long"] += 1
            self._rest = b""
            self._dropping = True

    def _line(self, line: bytes, found: list[Frame | Banner]) -> None:
        head, *pieces = line.split(b"<")
        self._rubbish(head)
        for piece in pieces:
            inner, mark, tail = piece.partition(b">")
            if not mark:
                self.counters["partial"] += 1
                continue
            item = self._body(inner)
            if item is not None:
                found.append(item)
            self._rubbish(tail)

    def _rubbish(self, data: bytes) -> None:
        if data and data != b"\r":
            self.counters["partial" if b">" in data else "garbage"] += 1

    def _body(self, inner: bytes) -> Frame | Banner | None:
        body, mark, digits = inner[:-5], inner[-5:-4], inner[-4:]
        if mark != b"*" or digits != b"%04X" % crc_hqx(body, 0xFFFF):
            self.counters["bad_checksum"] += 1
            return None
        item = _frame(body) or _banner(body)
        if item is None:
            self.counters["malformed"] += 1
        return item


def _frame(body: bytes) -> Frame | None:
    match = _FRAME.fullmatch(body)
    if match is None:
        return None
    seq, tick, channels, counts, temperature, supply = match.groups()
    number = int(seq)
    if number > 0xFFFF:
        return None
    return Frame(body, number, int(tick), int(channels), counts, temperature, supply)


def _banner(body: bytes) -> Banner | None:
    match = _BANNER.fullmatch(body)
    if match is None:
        return None
    name, firmware, channels, spacing, bits, kind = match.groups()
    if int(spacing) > 3_600_000 or not 1 <= int(bits) <= 32:
        return None
    return Banner(
        name.decode("ascii"),
        firmware.decode("ascii"),
        int(channels),
        int(spacing),
        int(bits),
        kind == b"simulated",
    )
