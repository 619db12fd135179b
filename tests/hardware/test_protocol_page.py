"""The protocol's page is true: its examples parse, and its faults are counted as it says."""

from __future__ import annotations

import re

from hardware.frames import LONGEST_LINE, FrameParser, crc
from hardware.reception import Reception


def test_check_value_of_the_checksum(crc_by_definition):
    """Source: check string of the CRC catalogue, CRC-16 with 1021 and FFFF (from memory)."""
    assert crc(b"123456789") == 0x29B1
    assert crc_by_definition(b"123456789") == 0x29B1


def test_every_example_is_whole_and_its_checksum_right(fenced, crc_by_definition):
    examples = [row for row in fenced("text") if row.startswith("<")]
    assert len(examples) >= 9
    for row in examples:
        body, digits = re.fullmatch(r"<(.*)\*([0-9A-F]{4})>", row).groups()
        assert int(digits, 16) == crc_by_definition(body.encode())
        parser = FrameParser()
        assert len(parser.feed(row.encode() + b"\n")) == 1
        assert not any(parser.counters.values())
        assert len(row) < LONGEST_LINE


def test_example_written_byte_by_byte(fenced):
    first, *_ = (row for row in fenced("text") if row.startswith("<"))
    spelled = next(row for row in fenced("text") if row.startswith("3C "))
    assert bytes.fromhex(spelled) == first.encode() + b"\n"


def test_faults_are_counted_as_the_page_says(fenced):
    reception = Reception(channels=3, simulated=False)
    rows = fenced("faults")
    assert len(rows) >= 15
    for row in rows:
        sent, outcome = re.fullmatch(r"(.*?)\s{2,}(.*)", row).groups()
        before = reception.counters
        wire = sent.encode().decode("unicode_escape").encode("latin-1") + b"\n"
        reception.feed(wire)
        after = reception.counters
        grown = {key: after[key] - before[key] for key in after if key != "samples"}
        expected = {key: outcome.split().count(key) for key in grown}
        assert grown == expected, row
