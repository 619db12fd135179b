"""The page of the receiver's wire is true: its bytes are those that we send and take."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from hardware import iq_client, iq_count, iq_options, iq_stream
from hardware.iq_client import HEADER, STEPS_TENTH_DB, Radio, commands
from monitor.core.spectrum import clipped_components, samples_from_bytes

PAGE = Path("hardware/IQ.md").read_text(encoding="utf-8")


def rows(kind):
    (block,) = re.findall(rf"```{kind}\n(.*?)```", PAGE, re.DOTALL)
    return block.splitlines()


def test_the_header_is_read_as_it_says():
    assert HEADER.unpack(bytes.fromhex(rows("header")[0])) == (b"RTL0", 5, 29)


def test_the_commands_are_those_that_are_sent():
    lines = rows("commands")
    wire = b"".join(bytes.fromhex(line[:14]) for line in lines)
    assert commands(Radio("x", 1, 2_400_000, 19.7, -3), 868_800_000) == wire
    said = [re.search(r"-?\d+", line[16:]) for line in lines]
    values = [int.from_bytes(bytes.fromhex(line[3:14]), "big", signed=True) for line in lines]
    assert values == [int(figure.group()) if figure else 0 for figure in said]


def test_the_samples_are_scaled_as_it_says():
    raw = bytes.fromhex(rows("samples")[0])
    b = np.frombuffer(raw, "u1").astype(float)
    expected = (b - 127.5) / 127.5
    samples = samples_from_bytes(raw, "cu8")
    assert samples.view("f4") == pytest.approx(expected, abs=1e-6)
    assert abs(samples[1]) == pytest.approx(1.0, abs=1e-4)
    assert clipped_components(raw, "cu8") == (1, 4)


def test_the_times_are_those_of_the_programs():
    table = {
        cells[0].strip(): cells[1].strip()
        for line in PAGE.splitlines()
        if line.startswith("| ") and len(cells := line.strip("|").split("|")) == 3
    }
    assert table["nothing answers at the port"].endswith(f"after {iq_client.CONNECT_S:g} s")
    assert table["no header"].startswith(f"{iq_client.HEADER_S:g} s")
    assert table["no samples"].startswith(f"{iq_client.STALL_S:g} s")
    assert f"after {iq_client.BACK_OFF_S:g} s, then ever later, up to 4 s" in PAGE
    assert iq_client.LONGEST_BACK_OFF_S == 4.0
    assert f"for {iq_stream.SILENT_S:g} s ({iq_stream.START_S:g} s for its first word)" in PAGE
    assert f"`settle_s` ({iq_options.SETTLE_S:g} s)" in PAGE
    assert f"`span` ({iq_options.SPAN_SHARE:g})" in PAGE
    assert f"{iq_count.BUFFER_SAMPLES // 1000} {iq_count.BUFFER_SAMPLES % 1000:03} samples" in PAGE


def test_the_gain_steps_are_those_of_the_program():
    text = " ".join(PAGE.split())
    for tuner, name in ((1, "tuner 1"), (2, "tuner 2"), (5, "tuners 5 and 6")):
        (said,) = re.findall(rf"{name}: ([−\d. ]+)[;.]", text)
        steps = [round(10 * float(word)) for word in said.replace("−", "-").rstrip(".").split()]
        assert tuple(steps) == STEPS_TENTH_DB[tuner]
