"""Options of a detector board, and what is said about a port that cannot be opened."""

from __future__ import annotations

import pytest

from hardware import settings_for
from monitor.core.errors import ConfigError, DeviceError
from tests.hardware.boards import board, counters


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({}, "sensor.device: missing"),
        ({"device": "nonsense://x"}, "sensor.device"),
        ({"device": "/dev/x", "baud": "fast"}, "sensor.baud"),
        ({"device": "/dev/x", "clock": "own"}, "sensor.clock"),
        ({"device": "/dev/x", "clock": "board"}, "sensor.clock_start: missing"),
        ({"device": "/dev/x", "clock_start": "2026-03-01T00:00:00Z"}, "sensor.clock_start"),
        ({"device": "/dev/x", "clock": "board", "clock_start": "2026-03-01"}, "clock_start"),
        ({"device": "/dev/x", "supply_v": [5, 4]}, "sensor.supply_v"),
        ({"device": "/dev/x", "bauds": 9600}, "sensor.bauds: unknown key; did you mean baud?"),
    ],
)
def test_wrong_options_are_one_line(options, words, tmp_path):
    with pytest.raises(ConfigError) as caught:
        settings_for("detector_board", options, tmp_path)
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)
    assert caught.value.exit_code == 2


def test_every_counter_is_on_the_protocols_page(tmp_path, page):
    front_end = board(tmp_path / "none")
    for name in counters(front_end):
        assert f"`{name}`" in page, name


def test_check_device_names_what_is_wrong_and_the_remedy(tmp_path, bench):
    settings_for("detector_board", {"device": str(bench.path)}, tmp_path).check_device()
    plain = tmp_path / "plain"
    plain.write_text("")
    for device, words in [("/dev/ttyNone7", "does not exist"), (str(plain), "not a serial port")]:
        with pytest.raises(DeviceError) as caught:
            settings_for("detector_board", {"device": device}, tmp_path).check_device()
        assert str(caught.value).startswith(f"sensor.device: {device} ")
        assert words in str(caught.value)
        assert "; " in str(caught.value)
        assert "\n" not in str(caught.value)
        assert caught.value.exit_code == 3
