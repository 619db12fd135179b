"""The order of frames: numbers that wrap, are lost, repeated, contradict; restarts; banners."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hardware.detector_board import sample_ticks
from hardware.frames import crc
from hardware.reception import Reception

NOTHING = {
    "frames": 0,
    "lost": 0,
    "repeated": 0,
    "contradicting": 0,
    "restarts": 0,
    "unannounced": 0,
    "refused": 0,
    "unplaced": 0,
}


def sent(*bodies: str) -> bytes:
    return b"".join(b"<%s*%04X>\n" % (b.encode(), crc(b.encode())) for b in bodies)


def frame(seq: int, tick: int, counts: str = "5", channels: int = 1) -> str:
    return f"FS1 {seq} {tick} {channels} {counts} - -"


def ready(channels: int = 1, spacing_ms: int = 100) -> Reception:
    reception = Reception(channels, simulated=False)
    assert reception.feed(sent(f"FSB b 1 {channels} {spacing_ms} 12 real")) == []
    return reception


def counted(reception: Reception, **expected: int) -> bool:
    actual = {key: reception.counters[key] for key in NOTHING}
    return actual == NOTHING | expected


def test_numbers_wrap_without_loss():
    reception = ready()
    taken = reception.feed(sent(*(frame((65530 + i) % 65536, 100 * i) for i in range(12))))
    assert [one.frame.seq for one in taken] == [*range(65530, 65536), *range(6)]
    assert counted(reception, frames=12)


@given(st.integers(0, 65535), st.lists(st.integers(1, 400), min_size=1, max_size=20))
def test_lost_is_the_number_of_frames_left_out(first, steps):
    reception = ready()
    seq, tick, missing = first, 100, 0
    reception.feed(sent(frame(seq, tick)))
    for step in steps:
        seq, tick, missing = (seq + step) % 65536, tick + 100 * step, missing + step - 1
        reception.feed(sent(frame(seq, tick)))
    assert counted(reception, frames=len(steps) + 1, lost=missing)


def test_repeated_frames_are_taken_once():
    reception = ready()
    lines = [frame(i, 100 * i) for i in range(5)]
    taken = reception.feed(sent(*lines, lines[4], lines[4], *lines[1:4], frame(5, 500)))
    assert [one.frame.seq for one in taken] == [0, 1, 2, 3, 4, 5]
    assert counted(reception, frames=6, repeated=5)


@pytest.mark.parametrize("again", [frame(3, 300, "6"), frame(3, 400), frame(4, 300)])
def test_same_number_or_same_tick_with_other_contents_contradicts(again):
    reception = ready()
    assert reception.feed(sent(frame(3, 300)))
    assert reception.feed(sent(again)) == []
    assert counted(reception, frames=1, contradicting=1)


def test_a_smaller_tick_is_a_start_of_the_board():
    reception = ready()
    reception.feed(sent(frame(700, 70_000)))
    taken = reception.feed(sent(frame(0, 100), frame(1, 200)))
    assert [one.restarted for one in taken] == [True, False]
    assert counted(reception, frames=3, restarts=1)


def test_where_the_samples_of_a_frame_begin():
    reception = ready(spacing_ms=50)
    lines = sent(frame(0, 200, "1;2"), frame(1, 300, "3;4"), frame(4, 900, "5;6"))
    taken = reception.feed(lines)
    # first: banner's spacing; then the frame before; after a loss the banner's spacing again
    assert [one.since_ms for one in taken] == [100, 200, 800]


def test_a_first_frame_may_begin_with_the_ticks():
    taken = ready(spacing_ms=50).feed(sent(frame(0, 100, "1;2;3")))
    ticks_ns, known = sample_ticks(taken)
    assert (ticks_ns // 1_000_000).tolist() == [0, 50, 100]
    assert known.all()


def test_without_a_spacing_only_the_last_sample_has_its_place():
    reception = ready(spacing_ms=0)
    taken = reception.feed(sent(frame(0, 200, "1;2;3"), frame(1, 300, "3;4")))
    assert [one.since_ms for one in taken] == [None, 200]
    assert counted(reception, frames=2, unplaced=2)


@pytest.mark.parametrize(
    ("banner", "words"),
    [("FSB b 1 1 100 12 simulated", "simulated"), ("FSB b 1 3 100 12 real", "3 channels")],
)
def test_a_board_that_does_not_fit_is_refused_until_one_does(banner, words):
    reception = Reception(1, simulated=False)
    channels = 3 if "3 channels" in words else 1
    counts = ",".join(["5"] * channels)
    assert reception.feed(sent(banner, frame(0, 100, counts, channels))) == []
    assert words in reception.refusal
    assert "\n" not in reception.refusal
    assert counted(reception, refused=1)
    assert len(reception.feed(sent("FSB b 1 1 100 12 real", frame(1, 200)))) == 1
    assert reception.refusal == ""


def test_a_simulated_site_refuses_a_real_board():
    reception = Reception(1, simulated=True)
    assert reception.feed(sent("FSB b 1 1 100 12 real", frame(0, 100))) == []
    assert "real" in reception.refusal


def test_after_an_opening_the_board_must_name_itself_again():
    reception = ready()
    assert len(reception.feed(sent(frame(0, 100)) + b"<FS1 1 20")) == 1
    reception.reopened()
    assert reception.feed(sent(frame(1, 200))) == []
    taken = reception.feed(sent("FSB b 1 1 100 12 real", frame(2, 300)))
    assert [one.frame.seq for one in taken] == [2]
    assert counted(reception, frames=2, unannounced=1, lost=1)
    assert reception.counters["partial"] == 1


def test_a_frame_with_another_number_of_channels_contradicts():
    reception = ready(channels=2)
    assert reception.feed(sent(frame(0, 100, "5", 1))) == []
    assert counted(reception, contradicting=1)
