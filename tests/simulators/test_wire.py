"""Lines as the protocol page prints them."""

from __future__ import annotations

import numpy as np
import pytest

from simulators import wire
from tests.simulators import desk


def test_the_test_parser_knows_the_pages_checksum() -> None:
    """CRC-16 with 0x1021 and 0xFFFF over "123456789" is 29B1 (hardware/PROTOCOL.md)."""
    assert desk.crc(b"123456789") == 0x29B1
    assert wire.line("123456789") == b"<123456789*29B1>\n"


def test_frames_and_banner_are_the_pages_examples() -> None:
    """hardware/PROTOCOL.md, "The frame", "The banner" and "Examples of faults"."""
    assert wire.frame(0, 100, 1, ["1834"], 253, 5012) == b"<FS1 0 100 1 1834 253 5012*02C1>\n"
    assert (
        wire.frame(1, 200, 3, ["1834,1790,2011"], 253, 5012)
        == b"<FS1 1 200 3 1834,1790,2011 253 5012*80DB>\n"
    )
    assert (
        wire.frame(4, 86400100, 1, ["-17"], -45, 4987) == b"<FS1 4 86400100 1 -17 -45 4987*0A1F>\n"
    )
    assert (
        wire.banner("rehearsal-board", "0.1", 3, 1000, 12)
        == b"<FSB rehearsal-board 0.1 3 1000 12 simulated*6051>\n"
    )


def test_samples_are_written_channel_by_channel() -> None:
    counts = np.array([[1, 20, 300], [4000, 0, 7]], np.int32)
    assert wire.sample_texts(counts) == ["1,20,300", "4000,0,7"]


@pytest.mark.parametrize("channels", [1, 2, 3])
@pytest.mark.parametrize("bits", [8, 12, 16])
def test_the_fullest_frame_fits_the_line_and_no_sample_more_would(channels, bits) -> None:
    sample = ",".join([str((1 << bits) - 1)] * channels)
    n = wire.samples_per_frame(channels, bits)
    worst = (65535, 999_999_999_999, channels)
    assert len(wire.frame(*worst, [sample] * n, -9999, 99999)) <= 200
    assert len(wire.frame(*worst, [sample] * (n + 1), -9999, 99999)) > 200
