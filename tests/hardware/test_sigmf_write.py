"""Recordings as others read them, and a folder that does not grow."""

from __future__ import annotations

import hashlib
import json
import re
import time
from dataclasses import replace

import numpy as np
import pytest

from hardware import open_front_end, settings_for
from hardware.iq_budget import make_room, next_name, recordings
from hardware.sigmf import find
from hardware.sigmf_write import About, Capture, Mark, write
from monitor.core.errors import ConfigError
from monitor.core.flags import Flag

UTC_NS = 1_764_608_400_000_000_000
ABOUT = About("cu8", 1e6, False, "why", "receiver", "program")
CAPTURES = [Capture(0, 868e6, 5, UTC_NS), Capture(100, 900e6, 7, UTC_NS + 1_500_000_000)]
MARKS = [Mark(100, 50, "upper", (899e6, 901e6)), Mark(0, 100, "lower", (867e6, 869e6), "first")]
RAW = [bytes(range(200)), bytes(100)]


def keys_follow_the_schema(document):
    """Source: core schema of the SigMF specification 1.2: required keys, types, order."""
    assert set(document) == {"global", "captures", "annotations"}
    top = document["global"]
    assert re.match(r"^(c|r)(f32|f64|i32|i16|u32|u16|i8|u8)(_le|_be)?$", top["core:datatype"])
    assert re.match(r"^\d+\.\d+\.\d$", top["core:version"])
    assert re.match(r"^[0-9a-fA-F]{128}$", top["core:sha512"])
    names = {key.partition(":")[0] for part in [top, *document["captures"]] for key in part}
    declared = {one["name"] for one in top["core:extensions"] if one["optional"] is True}
    assert names - declared == {"core"}
    for part in (document["captures"], document["annotations"]):
        starts = [one["core:sample_start"] for one in part]
        assert all(isinstance(start, int) and start >= 0 for start in starts)
        assert starts == sorted(starts)
    for one in document["annotations"]:
        assert ("core:freq_lower_edge" in one) == ("core:freq_upper_edge" in one)
        assert one["core:sample_count"] >= 0
    for one in document["captures"]:
        stamp = one.get("core:datetime", "2025-01-01T00:00:00Z")
        assert re.match(r"^\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d(\.\d+)?Z$", stamp)


def test_a_pair_of_files_says_what_it_holds(tmp_path):
    written = write(tmp_path, "a", ABOUT, CAPTURES, MARKS, RAW)
    data = (tmp_path / "a.sigmf-data").read_bytes()
    meta = (tmp_path / "a.sigmf-meta").read_bytes()
    assert data == b"".join(RAW)
    assert written.sha256 == hashlib.sha256(data).hexdigest()
    assert written.meta_sha256 == hashlib.sha256(meta).hexdigest()
    assert (written.data_bytes, written.meta_bytes) == (len(data), len(meta))
    document = json.loads(meta)
    keys_follow_the_schema(document)
    assert document["global"]["core:sha512"] == hashlib.sha512(data).hexdigest()
    assert document["global"]["fieldsill:simulated"] is False
    assert "SIMULATED" not in document["global"]["core:description"]
    assert [one["core:datetime"] for one in document["captures"]] == [
        "2025-12-01T17:00:00.000000Z", "2025-12-01T17:00:01.500000Z",
    ]  # fmt: skip
    assert [one["core:frequency"] for one in document["captures"]] == [868e6, 900e6]
    assert [one["core:label"] for one in document["annotations"]] == ["lower", "upper"]
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.sigmf-data", "a.sigmf-meta"]


def test_an_unknown_time_is_left_out_and_simulated_samples_are_called_so(tmp_path):
    about = About("cu8", 1e6, True, "why")
    write(tmp_path, "a", about, [Capture(0, 868e6, 5, None)], [], RAW)
    document = json.loads((tmp_path / "a.sigmf-meta").read_text())
    keys_follow_the_schema(document)
    assert document["global"]["core:description"] == "SIMULATED, not measured. why"
    assert document["global"]["fieldsill:simulated"] is True
    assert "core:hw" not in document["global"]
    assert document["captures"] == [
        {
            "core:sample_start": 0,
            "core:frequency": 868e6,
            "core:global_index": 0,
            "fieldsill:boot_ns": 5,
        }
    ]


def test_our_own_reader_takes_it(tmp_path):
    write(tmp_path, "a", ABOUT, CAPTURES[:1], [], RAW)
    data, found = find(tmp_path / "a.sigmf-meta")
    assert data == tmp_path / "a.sigmf-data"
    assert (found.datatype, found.rate_hz, found.centre_hz) == ("cu8", 1e6, 868e6)
    assert found.start == "2025-12-01T17:00:00.000000Z"


def test_a_reader_of_others_takes_it(tmp_path):
    sigmf = pytest.importorskip("sigmf", reason="the sigmf package is not installed")
    write(tmp_path, "a", ABOUT, CAPTURES, MARKS, RAW)
    found = sigmf.fromfile(str(tmp_path / "a.sigmf-meta"), autoscale=False)  # compares sha512, too
    found.validate()
    samples = found.read_samples().view(np.float32)
    assert np.allclose(samples, np.frombuffer(b"".join(RAW), "u1"))


def test_what_cannot_be_written_leaves_nothing(tmp_path):
    (tmp_path / "a.sigmf-meta.part").mkdir()  # in the way
    with pytest.raises(OSError, match="directory"):
        write(tmp_path, "a", ABOUT, CAPTURES, MARKS, RAW)
    assert [path.name for path in tmp_path.iterdir() if path.is_file()] == []


def filled(folder, n):
    for _ in range(n):
        name = next_name(folder, "x")
        write(folder, name, ABOUT, CAPTURES, MARKS, RAW)
    return recordings(folder)


def test_the_oldest_go_until_there_is_room_and_numbers_go_on(tmp_path):
    there = filled(tmp_path, 5)
    assert [one.number for one in there] == [1, 2, 3, 4, 5]
    size = there[0].size
    assert make_room(tmp_path, 6 * size, size) == []
    assert make_room(tmp_path, 4 * size, size) == there[:2]
    assert recordings(tmp_path) == there[2:]
    assert next_name(tmp_path, "x") == "000006-x"


def test_files_that_are_not_ours_stay_and_halves_go(tmp_path):
    (tmp_path / "letter.txt").write_text("mine")
    (tmp_path / "mine.sigmf-data").write_text("mine")
    (tmp_path / "000009-x.sigmf-data.part").write_text("half")
    (tmp_path / "000007-x.sigmf-data").write_text("samples without their metadata")
    assert [one.name for one in make_room(tmp_path, 10, 10)] == ["000007-x"]
    assert sorted(path.name for path in tmp_path.iterdir()) == ["letter.txt", "mine.sigmf-data"]


def test_what_is_larger_than_the_budget_empties_the_folder_and_no_more(tmp_path):
    there = filled(tmp_path, 2)
    assert make_room(tmp_path, 10, 20) == there
    assert list(tmp_path.iterdir()) == []


def test_simulated_samples_do_not_pass_for_real_ones(tmp_path):
    raw = [bytes([128, 127]) * 200_000]
    write(tmp_path, "a", replace(ABOUT, simulated=True), CAPTURES[:1], [], raw)
    options = {"file": "a.sigmf-meta", "bands": [[-1e5, 1e5]]}
    settings = settings_for("iq_file", options, tmp_path)
    clocks = (time.monotonic_ns, time.time_ns)
    with pytest.raises(ConfigError, match="write simulated = true") as caught:
        open_front_end(settings, 1, *clocks, False)
    assert "\n" not in str(caught.value)
    front = open_front_end(settings, 1, *clocks, True)
    flags = front.read(0.1).flags
    front.close()
    assert flags.size > 0
    assert (flags & int(Flag.SIMULATED) != 0).all()


def test_a_gap_at_one_centre_is_seen_by_a_reader(tmp_path):
    """Source: by hand; half a second at 1 MS/s is 500 000 samples."""
    captures = [Capture(0, 868e6, 0, None), Capture(100, 868e6, 500_000_000, None)]
    write(tmp_path, "a", ABOUT, captures, [], RAW)
    document = json.loads((tmp_path / "a.sigmf-meta").read_text("utf-8"))
    assert [one["core:global_index"] for one in document["captures"]] == [0, 500_000]
    with pytest.raises(ConfigError, match="number 1 does not join on"):
        find(tmp_path / "a.sigmf-meta")
