"""A simulated receiver's levels at its port, per gain step, frequency and temperature."""

from __future__ import annotations

import json
import time

import numpy as np
import pytest

from monitor.core.flags import Flag
from monitor.core.quantities import dbm_from_w
from monitor.record.reader import Record
from tests.system.commands import fieldsill, filled, start, wait_for
from tests.system.test_iq_stream import (
    device,
    ended,
    place,  # noqa: F401 - a fixture
)

LEVELS_DBM = (-48.0, -50.0 + 10 * np.log10(0.75))
STEPS = """
[[detector.step]]
gain = "19.7"
table = [["800MHz", -32.2], ["1GHz", -31.2]]

[[detector.step]]
gain = "9.0"
table = [["800MHz", -21.0], ["1GHz", -21.0]]
"""
"""The simulator: 0 dBFS at 19.7 dB of gain is -12 - 19.7 = -31.7 dBm. The table is made to say
half a dB less and more at its ends, as if the receiver differed over frequency."""


def stepped(folder, gain):
    """Give the place a calibration with gain steps, and its channels the name of one."""
    path = folder / "iq-stream-calibration.toml"
    calibration = filled(
        path.read_text(),
        {
            "# what 0 dBFS is at the port, dBm\ndbfs_to_dbm = -12.0\n": "",
            'averages = "power"\n': 'averages = "power"\n' + STEPS,
        },
    )
    path.write_text(calibration)
    site = folder / "site.toml"
    named = {
        f'name = "{name}"\nband = "{name} carrier"': f'name = "{name}"\nband = "{name} carrier"\n'
        f'gain = "{gain}"'
        for name in ("lower", "upper")
    }
    site.write_text(filled(site.read_text(), named))


def measured(folder, seconds):
    """Let the daemon work for so long; mean power (c,) in W at the ports and all flags set."""
    daemon = start("measure", "--site", folder / "site.toml")
    try:
        wait_for(lambda: device(folder).get("connected"))
        time.sleep(seconds)
    finally:
        ended(daemon)
    with Record.open(folder / "watch.db") as record:
        blocks = record.blocks(record.boots()[0].boot)
    whole = blocks.covered_ns > 0
    energy_w_ns = np.where(whole, blocks.energy_w_ns, 0.0)
    found_w = [
        energy_w_ns[blocks.channel == c].sum() / blocks.covered_ns[(blocks.channel == c)].sum()
        for c in (0, 1)
    ]
    return np.array(found_w), int(np.bitwise_or.reduce(blocks.flags[whole]))


def test_the_step_in_force_makes_dbm_of_dbfs_over_frequency(place):  # noqa: F811
    """Source: the air's levels; the step's table at the bands' middles, straight over log f."""
    stepped(place, "19.7")
    power_w, _ = measured(place, 14)
    middles_hz = np.sqrt([868.0e6 * 868.6e6, 869.0e6 * 869.7e6])
    says_dbm = np.interp(np.log(middles_hz), np.log([8e8, 1e9]), [-32.2, -31.2])
    for channel, level_dbm in enumerate(LEVELS_DBM):
        expected_dbm = level_dbm + says_dbm[channel] - (-12.0 - 19.7)
        assert dbm_from_w(power_w[channel]) == pytest.approx(expected_dbm, abs=0.1)


def test_a_gain_that_is_not_the_calibrated_one_is_refused_in_one_line(place):  # noqa: F811
    stepped(place, "9.0")
    done = fieldsill("check", "--site", place / "site.toml", "--listen", "0")
    assert done.returncode == 2, done.stdout
    assert done.stderr.strip() == (
        "fieldsill: site.toml: channel[1].gain: calibrated is gain step '9.0', but sensor.gain_db "
        "sets 19.7 dB; make them one and the same (a step is named by its dB)"
    )


def test_levels_in_dbm_are_no_calibration_of_a_receiver(place):  # noqa: F811
    path = place / "iq-stream-calibration.toml"
    values = {'quantity = "dbfs"': 'quantity = "dbm"', "dbfs_to_dbm = -12.0\n": ""}
    path.write_text(filled(path.read_text(), values))
    done = fieldsill("check", "--site", place / "site.toml", "--listen", "0")
    assert done.returncode == 2, done.stdout
    assert "detector.quantity: the receiver's levels are dBFS" in done.stderr
    assert len(done.stderr.splitlines()) == 1


def test_a_warm_receiver_is_set_right_by_its_table(place):  # noqa: F811
    """Source: 12.5 K above the reference at -0.04 dB/K reads 0.5 dB low; 0.5 dB is put back."""
    (place / "temp1_input").write_text("35500\n")
    site = place / "site.toml"
    told = f'temperature_file = "{place / "temp1_input"}"\nppm = 0'
    site.write_text(filled(site.read_text(), {"ppm = 0": told}))
    path = place / "iq-stream-calibration.toml"
    drift = 'averages = "power"\ntemperature_coefficient_db_per_k = -0.04\nreference_c = 23\n'
    path.write_text(filled(path.read_text(), {'averages = "power"\n': drift}))
    said = json.loads(fieldsill("check", "--json", "--site", site, "--listen", "0").stdout)
    assert not any("tells no temperature" in json.dumps(one) for one in said["findings"])
    power_w, flags = measured(place, 14)
    for channel, level_dbm in enumerate(LEVELS_DBM):
        expected_dbm = level_dbm + 19.7 + 0.5  # dbfs_to_dbm of the example leaves the gain in
        assert dbm_from_w(power_w[channel]) == pytest.approx(expected_dbm, abs=0.1)
    assert not flags & int(Flag.TEMPERATURE_UNKNOWN | Flag.OUT_OF_TEMPERATURE)
