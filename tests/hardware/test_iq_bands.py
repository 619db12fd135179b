"""Recorded I/Q: where its bands lie on the air, from the site file or the recording's header."""

from __future__ import annotations

import json

import pytest

from hardware import settings_for
from monitor.core.errors import ConfigError

RATE_HZ = 100_000.0


@pytest.fixture
def bare(tmp_path):
    """Samples without a header."""
    path = tmp_path / "a.cs16"
    path.write_bytes(bytes(4 * 10_000))
    return path


def pair(folder, centre_hz):
    """Samples with a header."""
    (folder / "b.sigmf-data").write_bytes(bytes(4 * 10_000))
    header = {
        "global": {"core:datatype": "ci16_le", "core:sample_rate": RATE_HZ},
        "captures": [{"core:frequency": centre_hz}],
    }
    path = folder / "b.sigmf-meta"
    path.write_text(json.dumps(header), encoding="utf-8")
    return path


def settings_of(path, **options):
    own = {"file": path.name, "bands": [[-2e4, 1e4]]}
    return settings_for("iq_file", own | options, path.parent)


def test_bands_lie_round_the_centre(bare):
    settings = settings_of(bare, rate_hz=RATE_HZ, centre_hz=868e6, fft=1000)
    assert settings.bands_hz == ((867.98e6, 868.01e6),)
    assert settings.bin_hz == 100.0


def test_a_header_tells_the_centre(tmp_path):
    assert settings_of(pair(tmp_path, 9e8)).bands_hz == ((899.98e6, 900.01e6),)


def test_a_recording_that_tells_no_centre_needs_it_in_the_site_file(bare, tmp_path):
    untuned = pair(tmp_path, 0)
    for path in (bare, untuned):
        with pytest.raises(ConfigError, match="sensor.centre_hz: missing"):
            settings_of(path, rate_hz=RATE_HZ)
    assert settings_of(untuned, centre_hz=5e8).bands_hz == ((499.98e6, 500.01e6),)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"centre_hz": 868e6}, "sensor.centre_hz: 868000000 differs from 900000000 in the"),
        ({"rate_hz": 2e5}, "sensor.rate_hz: 200000 differs from 100000 in the"),
    ],
)
def test_the_site_file_may_not_contradict_the_header(tmp_path, options, words):
    meta = pair(tmp_path, 9e8)
    same = settings_of(meta, centre_hz=9e8, rate_hz=RATE_HZ)
    assert (same.centre_hz, same.rate_hz) == (9e8, RATE_HZ)
    with pytest.raises(ConfigError) as caught:
        settings_of(meta, **options)
    assert words in str(caught.value)
