"""The detector board's side of its line protocol, after hardware/PROTOCOL.md."""

from __future__ import annotations

import binascii
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

MAX_LINE = 200
SEQ_WRAP = 65_536
_LONGEST_HEAD = len("<FS1 65535 999999999999 3 ")
_LONGEST_TAIL = len(" -9999 99999*FFFF>\n")


def line(body: str) -> bytes:
    """A body between its marks, with its checksum and the line's end."""
    data = body.encode("ascii")
    return b"<%s*%04X>\n" % (data, binascii.crc_hqx(data, 0xFFFF))


def banner(name: str, firmware: str, channels: int, spacing_ms: int, bits: int) -> bytes:
    """The line by which the board introduces itself: simulated, always."""
    return line(f"FSB {name} {firmware} {channels} {spacing_ms} {bits} simulated")


def frame(
    seq: int, tick_ms: int, channels: int, samples: Sequence[str], temp_dc: int, supply_mv: int
) -> bytes:
    """One frame; samples as from sample_texts, temp_dc tenths of a degree Celsius."""
    counts = ";".join(samples)
    return line(f"FS1 {seq} {tick_ms} {channels} {counts} {temp_dc} {supply_mv}")


def sample_texts(counts: NDArray[np.int32]) -> list[str]:
    """The wire's text of each sample: counts int32 (n, c), channels separated by commas."""
    return list(map(",".join, zip(*(map(str, column) for column in counts.T.tolist()))))


def samples_per_frame(channels: int, bits: int) -> int:
    """Most samples that surely fit into a line, for counts of so many bits."""
    longest = channels * (len(str((1 << bits) - 1)) + 1)
    return (MAX_LINE - _LONGEST_HEAD - _LONGEST_TAIL + 1) // longest
