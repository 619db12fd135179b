"""The parser: any cut gives the same frames, no damaged byte gives another frame."""

from __future__ import annotations

import string

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hardware.frames import Banner, Frame, FrameParser, crc, decode_counts
from monitor.core.readings import MISSING

counts = st.one_of(st.integers(-(10**9) + 1, 10**9 - 1).map(str), st.just("-"))


@st.composite
def bodies(draw):
    channels = draw(st.integers(1, 3))
    samples = draw(
        st.lists(st.lists(counts, min_size=channels, max_size=channels), min_size=1, max_size=3)
    )
    text = ";".join(",".join(sample) for sample in samples)
    temperature = draw(st.one_of(st.just("-"), st.integers(-9999, 9999).map(str)))
    supply = draw(st.one_of(st.just("-"), st.integers(0, 99999).map(str)))
    seq, tick = draw(st.integers(0, 65535)), draw(st.integers(0, 10**15 - 1))
    return f"FS1 {seq} {tick} {channels} {text} {temperature} {supply}".encode()


def wire(body: bytes) -> bytes:
    return b"<%s*%04X>\n" % (body, crc(body))


def parse(*pieces: bytes) -> tuple[list[Frame | Banner], dict[str, int]]:
    parser = FrameParser()
    items = [item for piece in pieces for item in parser.feed(piece)]
    return items, parser.counters


rubbish = st.one_of(
    st.binary(max_size=260),
    st.text(alphabet="<>*\n\r 0123456789,;FSB", max_size=60).map(str.encode),
    bodies().map(wire),
)


@given(st.lists(rubbish, max_size=12), st.data())
def test_any_cut_gives_the_same_frames_and_counts(parts, data):
    stream = b"".join(parts)
    cuts = sorted(data.draw(st.lists(st.integers(0, len(stream)), max_size=20)))
    pieces = [stream[a:b] for a, b in zip([0, *cuts], [*cuts, len(stream)], strict=True)]
    assert parse(*pieces, b"\n") == parse(stream, b"\n")


@given(bodies())
def test_a_whole_frame_is_taken_as_sent(body):
    items, counters = parse(wire(body))
    assert [item.body for item in items] == [body]
    assert not any(counters.values())


@settings(max_examples=60)
@given(bodies(), st.data())
def test_no_single_wrong_byte_gives_another_frame(body, data):
    """A CRC-16 finds each burst of up to 16 bits (its generator has 17 bits and a last term)."""
    sent = wire(body)
    place = data.draw(st.integers(0, len(sent) - 1))
    value = data.draw(st.integers(0, 255).filter(lambda v: v != sent[place]))
    damaged = sent[:place] + bytes([value]) + sent[place + 1 :]
    following = wire(b"FS1 9 9 1 9 - -")
    items, counters = parse(damaged + b"\n" + following)
    assert {item.body for item in items} <= {body, b"FS1 9 9 1 9 - -"}
    assert items[-1].body == b"FS1 9 9 1 9 - -"
    # only the line's end may be damaged without harm to the frame
    if place < len(sent) - 1:
        assert len(items) == 1
        assert sum(counters.values()) >= 1


def test_every_single_wrong_byte_of_one_frame():
    body = b"FS1 17 86400100 3 1834,-,2011 -45 5012"
    sent = wire(body)
    for place in range(len(sent) - 1):
        for value in set(range(256)) - {sent[place]}:
            items, _ = parse(sent[:place] + bytes([value]) + sent[place + 1 :] + b"\n")
            assert items == [], (place, value)


def test_every_beginning_of_a_frame_is_refused():
    sent = wire(b"FS1 17 86400100 3 1834,1790,2011 -45 5012")
    for length in range(1, len(sent) - 1):
        items, counters = parse(sent[:length] + b"\n")
        assert items == []
        assert counters["partial"] == 1


@pytest.mark.parametrize(
    "body",
    [
        b"FS1 65536 1 1 5 - -",
        b"FS1 -1 1 1 5 - -",
        b"FS1 0 1 4 5,5,5,5 - -",
        b"FS1 0 1 2 5 - -",
        b"FS1 0 1 2 5,5;5 - -",
        b"FS1 0 1 1 5; - -",
        b"FS1 0 1 1 +5 - -",
        b"FS1 0 1 1 5.0 - -",
        b"FS1 0 1 1  5 - -",
        b"FS1 0 1 1 1000000000 - -",
        b"FS1 0 1 1 5 99999 -",
        b"FS1 0 1 1 5 - -1",
        b"FS1 0 1 1 5 - - ",
        b"FSB a 1 3 100 12 fake",
        b"FSB a 1 3 100 33 real",
        b"FSB a 1 3 3600001 12 real",
        b"FSB  1 3 100 12 real",
        b"",
    ],
)
def test_right_checksum_over_a_wrong_body_is_malformed(body):
    items, counters = parse(wire(body))
    assert items == []
    assert counters["malformed"] == 1


def test_banner_fields():
    items, _ = parse(wire(b"FSB sill-3 1.0.2 3 100 12 simulated"))
    assert items == [Banner("sill-3", "1.0.2", 3, 100, 12, True)]


def test_too_long_a_line_is_dropped_whole_and_once():
    good = wire(b"FS1 9 9 1 9 - -")
    long = b"x" * 900
    for pieces in ([long + good + good], [long, long, good, good], [b"x" * 200, b"\n", good]):
        items, counters = parse(*pieces)
        assert len(items) == 1
        assert counters["too_long"] == 1
        assert counters["garbage"] == 0


def test_line_of_exactly_the_longest_length_is_taken():
    body = b"FS1 9 9 1 12;" + b";".join([b"1"] * 88) + b" - -"
    assert len(wire(body)) == 200
    assert len(parse(wire(body))[0]) == 1
    longer = body.replace(b"12;", b"123;")
    assert parse(wire(longer)) == ([], parse(b"x" * 200 + b"\n")[1])


def test_restart_counts_the_unfinished_line():
    parser = FrameParser()
    parser.feed(b"<FS1 9 9")
    parser.restart()
    assert parser.counters["partial"] == 1
    assert len(parser.feed(wire(b"FS1 9 9 1 9 - -"))) == 1


@given(st.lists(st.lists(counts, min_size=2, max_size=2), min_size=1, max_size=5))
def test_counts_decode_in_order(samples):
    field = ";".join(",".join(sample) for sample in samples).encode()
    flat = [MISSING if c == "-" else int(c) for sample in samples for c in sample]
    assert decode_counts([field]) == flat
    assert decode_counts([field, field]) == flat * 2


def test_lower_case_digits_are_refused():
    for n in range(200):
        sent = wire(b"FS1 %d 9 1 9 - -" % n)
        if sent[-6:].translate(None, string.digits.encode()).strip(b"<>*\n"):
            lowered = sent[:-6] + sent[-6:].lower()
            assert parse(lowered)[0] == []
