"""The page of the bridge is true: its figures and options are those of the program."""

from __future__ import annotations

import math
import re
import subprocess
import sys
from pathlib import Path

from hardware import soapy_bridge as bridge

PAGE = " ".join(Path("hardware/SOAPY.md").read_text(encoding="utf-8").split())


def test_its_options_are_those_of_the_program():
    run = [sys.executable, "hardware/soapy_bridge.py", "--help"]
    there = set(re.findall(r"--[a-z-]+", subprocess.check_output(run, text=True))) - {"--help"}
    said = set(re.findall(r"`(--[a-z-]+)`", PAGE))
    assert said == there


def test_its_times_and_bounds_are_those_of_the_program():
    assert f"reads nothing for {bridge.SEND_S:g} s" in PAGE
    silent_s = bridge.READ_US * bridge.READS_WITHOUT / 1e6
    assert f"no sample from the receiver for {silent_s:g} s" in PAGE
    assert f"a gain more than {bridge.GAIN_OFF_DB:g} dB off" in PAGE
    assert f"a rate more than {bridge.RATE_OFF * 1e6:g} parts in a million" in PAGE
    assert f"a centre more than {bridge.CENTRE_OFF_HZ:g} Hz" in PAGE


def test_its_levels_follow_from_the_scale():
    """1/6 of a step squared (I and Q, 1/12 each) against a full scale of 127.5 steps."""
    rounding_db = 10 * math.log10(1 / 6 / 127.5**2)
    assert f"{rounding_db:.1f}".replace("-", "−") + " dBFS over the whole rate" in PAGE
    assert f"reads {20 * math.log10(128 / 127.5):.3f} dB higher" in PAGE
    assert f"{20 * math.log10(32768 / 2048):.0f} dB here" in PAGE
