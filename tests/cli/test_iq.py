"""fieldsill iq: made files, SigMF pairs, real recordings, and mistakes."""

from __future__ import annotations

import csv
import json
import os
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tests.cli.command import run

FOLDER = os.environ.get("FIELDSILL_RECORDINGS")
UNSET = "FIELDSILL_RECORDINGS is not set: real recordings not tested"


def tone(n: int = 4096, step: float = 1 / 16) -> np.ndarray[Any, Any]:
    return 0.5 * np.exp(2j * np.pi * step * np.arange(n))


def write(path: Path, samples: np.ndarray[Any, Any], dtype: str, scale: float) -> Path:
    parts = np.stack([samples.real, samples.imag], axis=1) * scale
    path.write_bytes((parts if dtype == "<f4" else np.rint(parts)).astype(dtype).tobytes())
    return path


@pytest.mark.parametrize(
    ("name", "dtype", "scale"),
    [("a.cs8", "i1", 128.0), ("a.cs16", "<i2", 32768.0), ("a.cf32", "<f4", 1.0)],
)
def test_a_tone_at_half_scale(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, name: str, dtype: str, scale: float
) -> None:
    """|z| = 0.5 is -6.02 dBFS; the tone lies at a sixteenth of the rate."""
    path = write(tmp_path / name, tone(), dtype, scale)
    found = run(
        capsys,
        ["iq", path, "--rate", "1.6MHz", "--band", "90kHz:110kHz", "--band=-800e3:0", "--json"],
    ).document
    near, far = found["bands"]
    assert (near["low_hz"], near["high_hz"]) == (90e3, 110e3)
    assert near["power_dbfs"] == pytest.approx(-6.02, abs=0.05)
    assert near["peak_dbfs"] == pytest.approx(-6.02, abs=0.05)
    assert far["power_dbfs"] < -40
    assert found["total_power_dbfs"] == pytest.approx(-6.02, abs=0.05)
    assert (found["samples"], found["duration_s"]) == (4096, 4096 / 1.6e6)
    assert found["clipped_fraction"] == (None if name.endswith("cf32") else 0.0)


def test_clipping_is_counted_and_said(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = tmp_path / "a.cu8"
    path.write_bytes(bytes([0, 128, 255, 128]) * 1024)
    found = run(capsys, ["iq", path, "--json"]).document
    assert found["clipped_fraction"] == 0.5
    assert any("lower bound" in note for note in found["notes"])
    assert found["duration_s"] is None
    assert "lower bound" in run(capsys, ["iq", path]).out


def sigmf(folder: Path, **more: object) -> Path:
    write(folder / "a.sigmf-data", tone(), "<i2", 32768.0)
    whole = {"core:datatype": "ci16_le", "core:sample_rate": 1.6e6} | more
    document = {"global": whole, "captures": [{"core:frequency": 1.8e9}], "annotations": []}
    meta = folder / "a.sigmf-meta"
    meta.write_text(json.dumps(document), encoding="utf-8")
    return meta


@pytest.mark.parametrize("suffix", [".sigmf-meta", ".sigmf-data"])
def test_a_sigmf_pair_knows_its_rate_and_centre(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, suffix: str
) -> None:
    path = sigmf(tmp_path).with_suffix(suffix)
    found = run(capsys, ["iq", path, "--band", "90kHz:110kHz", "--json"]).document
    assert found["bands"][0]["power_dbfs"] == pytest.approx(-6.02, abs=0.01)
    assert (found["rate_hz"], found["centre_hz"]) == (1.6e6, 1.8e9)
    assert found["duration_s"] == 4096 / 1.6e6


def test_bytes_round_the_samples_are_left_out(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """A header of 128 bytes read as samples moved a real mean by 1.2 dB once."""
    meta = sigmf(tmp_path, **{"core:trailing_bytes": 8})
    document = json.loads(meta.read_text(encoding="utf-8"))
    document["captures"][0]["core:header_bytes"] = 128
    meta.write_text(json.dumps(document), encoding="utf-8")
    data = meta.with_suffix(".sigmf-data")
    data.write_bytes(b"\x7f" * 128 + data.read_bytes() + b"\x7f" * 8)
    found = run(capsys, ["iq", meta, "--json"]).document
    assert found["samples"] == 4096
    assert found["total_power_dbfs"] == pytest.approx(-6.02, abs=0.01)


def retuned(folder: Path) -> Path:
    """A tone at half scale, then one at a quarter after a retune; a raw header before each."""
    meta = sigmf(folder)
    loud = meta.with_suffix(".sigmf-data").read_bytes()
    weak = write(folder / "w", tone() / 2, "<i2", 32768.0).read_bytes()
    meta.with_suffix(".sigmf-data").write_bytes(bytes(128) + loud + bytes(64) + weak)
    document = json.loads(meta.read_text(encoding="utf-8"))
    document["captures"] = [
        {"core:sample_start": 0, "core:frequency": 1.8e9, "core:header_bytes": 128},
        {"core:sample_start": 4096, "core:frequency": 1.9e9, "core:header_bytes": 64},
    ]
    meta.write_text(json.dumps(document), encoding="utf-8")
    return meta


def test_one_capture_of_a_retuned_recording(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    meta = retuned(tmp_path)
    assert "choose one capture, 0 to 1" in run(capsys, ["iq", meta, "--json"]).one_line
    for number, (centre_hz, dbfs) in enumerate(((1.8e9, -6.02), (1.9e9, -12.04))):
        found = run(capsys, ["iq", meta, "--capture", number, "--json"]).document
        assert (found["centre_hz"], found["samples"]) == (centre_hz, 4096)
        assert found["total_power_dbfs"] == pytest.approx(dbfs, abs=0.01)


def test_a_raw_header_is_skipped_where_it_is_told(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    path = write(tmp_path / "a.cs16", tone(), "<i2", 32768.0)
    path.write_bytes(b"\x7f" * 128 + path.read_bytes())
    found = run(capsys, ["iq", path, "--header-bytes", 128, "--json"]).document
    assert found["samples"] == 4096
    assert found["total_power_dbfs"] == pytest.approx(-6.02, abs=0.01)


def test_floats_are_scaled_as_their_metadata_say(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """Stored in codes of 16 bits: 20 log 32768 = 90.3 dB higher than full scale."""
    meta = sigmf(tmp_path, **{"core:datatype": "cf32_le"})
    write(meta.with_suffix(".sigmf-data"), tone(), "<f4", 32768.0)
    document = json.loads(meta.read_text(encoding="utf-8"))
    document["captures"][0]["capture_details:acq_scale_factor"] = 1 / 32768
    meta.write_text(json.dumps(document), encoding="utf-8")
    more = ["--band", "90kHz:110kHz", "--corrected", "--json"]
    found = run(capsys, ["iq", meta, *more]).document
    assert found["total_power_dbfs"] == pytest.approx(-6.02, abs=0.01)
    for key in ("power_dbfs", "peak_dbfs", "corrected_dbfs"):
        assert found["bands"][0][key] == pytest.approx(-6.02, abs=0.01)
    assert any("multiplied by 3.05176e-05" in note for note in found["notes"])


def test_corrected_figures_have_a_key_of_their_own(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """An offset of 20 codes beside a tone of 0.1, by hand: -20 dB, with the offset -13.3 dB."""
    path = write(tmp_path / "a.cs8", tone() * 0.2 + 20 / 128, "i1", 128.0)
    arguments = ["iq", path, "--rate", "1.6MHz", "--band=-200kHz:200kHz"]
    (plain,) = run(capsys, [*arguments, "--json"]).document["bands"]
    (band,) = run(capsys, [*arguments, "--corrected", "--json"]).document["bands"]
    assert set(plain) == {"low_hz", "high_hz", "power_dbfs", "peak_dbfs"}
    assert plain == {key: band[key] for key in plain}
    assert band["power_dbfs"] == pytest.approx(10 * np.log10(0.01 + (20 / 128) ** 2), abs=0.1)
    # the tone leaks nothing into the bins that are left out; they count as the rest of the band
    assert band["corrected_dbfs"] == pytest.approx(
        -20.0 - 10 * np.log10(band["usable_share"]), abs=0.1
    )
    assert band["usable_share"] == pytest.approx(249 / 256, abs=0.01)
    assert "corrected" in run(capsys, [*arguments, "--corrected"]).out
    assert "--band" in run(capsys, ["iq", path, "--corrected"]).one_line


def test_for_people(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    out = run(capsys, ["iq", sigmf(tmp_path), "--band", "90kHz:110kHz"]).out
    assert "ci16_le, 4096 samples, 0.00256 s" in out
    assert "centre 1.8 GHz" in out
    assert "90,000        110,000       -6.02" in out
    assert "say nothing about a field strength" in out


def test_a_simulated_recording_is_called_so(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    meta = sigmf(tmp_path, **{"fieldsill:simulated": True})
    assert run(capsys, ["iq", meta]).out.startswith("SIMULATED: these figures are invented\n")
    assert run(capsys, ["iq", meta, "--json"]).document["simulated"] is True
    meta = sigmf(tmp_path, **{"fieldsill:simulated": False})
    assert "SIMULATED" not in run(capsys, ["iq", meta]).out
    assert run(capsys, ["iq", meta, "--json"]).document["simulated"] is False


def test_silence_has_no_level(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = tmp_path / "a.cs8"
    path.write_bytes(bytes(4096))
    found = run(capsys, ["iq", path, "--rate", "1e6", "--band", "0:1e5", "--json"]).document
    assert found["total_power_dbfs"] is None
    assert found["bands"][0]["power_dbfs"] is None
    assert "nothing" in run(capsys, ["iq", path]).out


@pytest.mark.parametrize(
    ("name", "body", "more", "code", "says"),
    [
        ("none.cu8", None, [], 3, "no such file"),
        ("a.bin", bytes(4096), [], 2, "--datatype"),
        ("a.cu8", b"", [], 2, "no sample"),
        ("a.cu8", b"\0", [], 2, "no sample"),
        ("a.cu8", bytes(4096), ["--band", "0:1"], 2, "--rate"),
        ("a.cu8", bytes(100), ["--rate", "1MHz", "--band", "0:1e5"], 2, "--fft"),
        ("a.cu8", bytes(4096), ["--rate", "1MHz", "--band", "5"], 2, "LOW:HIGH"),
        ("a.cu8", bytes(4096), ["--rate", "1MHz", "--band", "0:2MHz"], 2, "outside"),
        ("a.cu8", bytes(4096), ["--rate", "1MHz", "--band", "5:4"], 2, "low end"),
        ("a.cu8", bytes(4096), ["--rate", "-1MHz"], 2, "not a frequency"),
        ("a.cu8", bytes(4096), ["--datatype", "cu9"], 2, "cu9"),
        ("a.cu8", bytes(4096), ["--overlap", "1"], 2, "overlap"),
        ("a.cu8", bytes(4096), ["--fft", "0"], 2, "fft"),
        ("a.cf32", b"\0\0\xc0\x7f" * 64, [], 2, "not numbers"),
        ("a.sigmf-meta", b"{", [], 3, "no such file"),
        ("a.sigmf", bytes(4096), [], 2, "unpack it first"),
        ("a.cu8", bytes(4096), ["--capture", "0"], 2, "--capture"),
    ],
)
def test_mistakes_are_one_line(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, name: str, body: bytes | None,
    more: list[str], code: int, says: str,
) -> None:  # fmt: skip
    path = tmp_path / name
    if body is not None:
        path.write_bytes(body)
    found = run(capsys, ["iq", path, *more])
    assert found.code == code
    assert found.out == ""
    assert says in found.one_line


def test_broken_sigmf_metadata(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    meta = sigmf(tmp_path, **{"core:datatype": "ru99"})
    assert "ru99" in run(capsys, ["iq", meta]).one_line
    meta.write_text("{", encoding="utf-8")
    assert "not a JSON text" in run(capsys, ["iq", meta]).one_line


def recorded() -> list[Any]:
    if not FOLDER:
        return [pytest.param({}, id="none", marks=pytest.mark.skip(reason=UNSET))]
    text = (Path(FOLDER) / "iq" / "reference.json").read_text(encoding="utf-8")
    return [pytest.param(entry, id=entry["file"]) for entry in json.loads(text)]


def test_recordings_are_here() -> None:
    if not FOLDER:
        pytest.skip(UNSET)
    with (Path(FOLDER) / "iq" / "manifest.csv").open(encoding="utf-8") as file:
        listed = {row["file"] for row in csv.DictReader(file)}
    assert {param.values[0]["file"] for param in recorded()} == listed
    assert len(listed) > 10


@pytest.mark.parametrize("entry", recorded())
def test_real_recording(capsys: pytest.CaptureFixture[str], entry: dict[str, Any]) -> None:
    """Reference figures of the folder, worked out with scipy.signal.welch: within 0.1 dB.

    With the same window, overlap and bins the two agree far closer; 1e-6 dB is asked for.
    """
    for welch in entry["welch"]:
        bands = [f"--band={band['lo_hz']}:{band['hi_hz']}" for band in welch["bands"]]
        found = run(
            capsys,
            ["iq", f"{FOLDER}/iq/{entry['file']}", "--rate", entry["sample_rate"],
             "--fft", welch["nperseg"], *bands, "--json"],
        ).document  # fmt: skip
        assert found["samples"] == entry["n"]
        assert found["total_power_dbfs"] == pytest.approx(entry["total_dbfs"], abs=1e-6)
        for band, reference in zip(found["bands"], welch["bands"], strict=True):
            assert band["power_dbfs"] == pytest.approx(reference["dbfs"], abs=1e-6)
            assert band["peak_dbfs"] >= band["power_dbfs"]
        if not entry["datatype"].startswith("cf32"):
            assert found["clipped_fraction"] == pytest.approx(entry["clip_fraction"], abs=1e-12)
            clipped = any("lower bound" in note for note in found["notes"])
            assert clipped == (entry["clip_fraction"] > 0)
