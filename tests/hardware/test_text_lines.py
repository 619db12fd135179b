"""Text lines over a real pseudo-terminal: columns, separators, malformed lines, arrival stamps."""

from __future__ import annotations

import time

import numpy as np
import pytest

from hardware import open_front_end, settings_for
from monitor.core.errors import ConfigError
from monitor.core.flags import Flag
from monitor.core.readings import MISSING


def text_board(path, clock_ns=time.monotonic_ns, simulated=False, **options):
    options = {"device": str(path), "columns": [2, 3], "resolution": 0.001} | options
    settings = settings_for("text_lines", options, path.parent)
    return open_front_end(settings, len(settings.columns), clock_ns, time.time_ns, simulated)


def sent(bench, front_end, text, within_s=5.0):
    """Sends the text once the port is open; batches until all of its lines have been read."""
    batches, end = [front_end.read(0.0)], time.monotonic() + within_s
    lines = front_end.status().counters["lines"] + text.count("\n")
    bench.send(text.encode())
    while front_end.status().counters["lines"] < lines:
        assert time.monotonic() < end, front_end.status()
        batches.append(front_end.read(0.02))
    return batches


def rows(batches):
    return np.concatenate([b.counts for b in batches]).tolist()


def test_columns_become_counts_at_the_resolution(bench):
    front_end = text_board(bench.path)
    batches = sent(bench, front_end, "rest of a line\nA, -40.565, 1.25 ,x\r\nA,-30,0.0004,x\n")
    assert rows(batches) == [[-40565, 1250], [-30000, 0]]
    assert front_end.status().counters["partial"] == 1
    assert front_end.status().connected
    assert front_end.clock_fix is None
    front_end.close()


@pytest.mark.parametrize("separator", ["", " "])
def test_blanks_of_any_number_separate(bench, separator):
    front_end = text_board(bench.path, separator=separator, columns=[1])
    batches = sent(bench, front_end, "\n-1.5   7\n\t-2.5\t8\n")
    assert rows(batches) == [[-1500], [-2500]]
    front_end.close()


def test_what_is_no_number_is_counted_and_never_a_reading(bench):
    front_end = text_board(bench.path)
    text = "\n# a comment\nt,1\nt,x,y\nt,1,zz\nt,,3\nt,nan,inf\nt,1e30,4\nt,1_000,OL\n"
    batches = sent(bench, front_end, text)
    assert rows(batches) == [[1000, MISSING], [MISSING, 3000], [MISSING, MISSING], [MISSING, 4000]]
    counters = front_end.status().counters
    assert (counters["comments"], counters["malformed"]) == (1, 5)
    assert not any(b.flags.any() for b in batches)
    front_end.close()


@pytest.mark.parametrize("word", ["OL", "inf"])
def test_the_overload_word_is_no_reading_and_above_range(bench, word):
    """Flagged as above range, so that what it leaves open cannot pass as quiet."""
    front_end = text_board(bench.path, overload=word)
    batches = sent(bench, front_end, f"\nt,1,2\nt,3, {word}\nt,{word},{word}\nt,over,4\n")
    assert rows(batches) == [[1000, 2000], [3000, MISSING], [MISSING, MISSING], [MISSING, 4000]]
    above = int(Flag.ABOVE_RANGE)
    assert np.concatenate([b.flags for b in batches]).tolist() == [0, above, above, 0]
    counters = front_end.status().counters
    assert (counters["overload"], counters["malformed"]) == (3, 1)
    front_end.close()


def test_too_long_a_line_is_dropped(bench):
    front_end = text_board(bench.path)
    batches = sent(bench, front_end, "\nt,1,2\n")
    bench.send(b"9" * 1500)
    while not front_end.status().counters["too_long"]:
        batches.append(front_end.read(0.02))
    batches += sent(bench, front_end, ",5,5\nt,3,4\n")
    assert rows(batches) == [[1000, 2000], [3000, 4000]]
    front_end.close()


def test_stamps_increase_and_never_run_ahead(bench):
    front_end = text_board(bench.path, columns=[1])
    batches = sent(bench, front_end, "\n")
    before = time.monotonic_ns()
    for burst in (1, 4, 1, 30):
        batches += sent(bench, front_end, "7\n" * burst)
        assert batches[-1].now_ns <= time.monotonic_ns()
    times = np.concatenate([b.times_ns for b in batches])
    assert times.size == 36
    assert (np.diff(times) > 0).all()
    assert before - 1_000_000_000 < times[0]
    assert times[-1] <= time.monotonic_ns()
    front_end.close()


def test_silence_and_unplug_show_in_the_status(bench, fast_ns):
    front_end = text_board(bench.path, fast_ns)
    sent(bench, front_end, "\nt,1,2\n")
    assert front_end.status().connected
    time.sleep(0.8)
    assert "no number came" in front_end.status().text
    bench.unplug()
    while front_end.status().counters["open_failures"] < 2:
        front_end.read(0.02)
    assert not front_end.status().connected
    assert "trying again" in front_end.status().text
    bench.plug()
    while front_end.status().counters["reopened"] < 1:
        front_end.read(0.02)
    assert rows(sent(bench, front_end, "\nt,5,6\n")) == [[5000, 6000]]
    front_end.close()


def test_simulated_readings_are_marked(bench):
    front_end = text_board(bench.path, simulated=True)
    batches = sent(bench, front_end, "x\nt,1,2\n")
    assert np.concatenate([b.flags for b in batches]).tolist() == [Flag.SIMULATED]
    front_end.close()


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"columns": [0]}, "sensor.columns: 0 is not a column number"),
        ({"columns": 3}, "sensor.columns"),
        ({"resolution": 0}, "sensor.resolution"),
        ({"device": "what://x"}, "sensor.device"),
        ({"seperator": ","}, "did you mean separator?"),
        ({"overload": "99"}, "sensor.overload: '99' reads as a figure"),
        ({"overload": "O,L"}, "sensor.overload: 'O,L' holds the separator"),
    ],
)
def test_wrong_options_are_one_line(options, words, tmp_path):
    good = {"device": "/dev/x", "columns": [1], "resolution": 0.001}
    with pytest.raises(ConfigError) as caught:
        settings_for("text_lines", good | options, tmp_path)
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_columns_must_match_the_channels(tmp_path):
    options = {"device": "/dev/x", "columns": [1, 2], "resolution": 0.001}
    settings = settings_for("text_lines", options, tmp_path)
    assert settings.resolution == 0.001
    with pytest.raises(ConfigError, match="sensor.columns: 2 columns for 3 channels"):
        open_front_end(settings, 3, time.monotonic_ns, time.time_ns, False)
