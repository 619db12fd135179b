"""A recording of samples as a SigMF pair (SigMF specification 1.x, core schema, from its text).

A recording is two files: `.sigmf-data` holds the samples as they came, `.sigmf-meta` says in JSON
what they are. What the core schema has no word for stands in a namespace of our own.
"""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import BinaryIO

from monitor.core.readings import NS_PER_S
from monitor.core.sigmf import DATA, META

VERSION = "1.2.0"
"""Of the specification: nothing later than this is used."""
OWN = "fieldsill"
OWN_VERSION = "1.0.0"
PART = ".part"
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


@dataclass(frozen=True, slots=True)
class Mark:
    """A stretch of samples that means something; edges in Hz on the air, None where it has none."""

    start: int
    samples: int
    label: str
    edges_hz: tuple[float, float] | None = None
    comment: str = ""


@dataclass(frozen=True, slots=True)
class Capture:
    """Where a run of samples begins, how the receiver was tuned, and when that was.

    boot_ns: by the machine's clock since it started; utc_ns: None where UTC was not known.
    """

    start: int
    centre_hz: float
    boot_ns: int
    utc_ns: int | None


@dataclass(frozen=True, slots=True)
class About:
    """What holds for the whole recording."""

    datatype: str
    rate_hz: float
    simulated: bool
    description: str = ""
    hardware: str = ""
    recorder: str = ""
    own: Mapping[str, object] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Written:
    """The hashes (hexadecimal) and sizes of a pair of files."""

    sha256: str
    meta_sha256: str
    data_bytes: int
    meta_bytes: int


def document(
    about: About, captures: Sequence[Capture], marks: Sequence[Mark], sha512: str
) -> dict[str, object]:
    """The metadata. sha512: of the file of samples, hexadecimal.

    Simulated samples are called so where any reader shows it, and in a word of our own.
    """
    said = f"SIMULATED, not measured. {about.description}" if about.simulated else about.description
    there = sorted(captures, key=lambda one: one.start)
    texts = {"description": said, "hw": about.hardware, "recorder": about.recorder}
    return {
        "global": {
            "core:datatype": about.datatype,
            "core:sample_rate": about.rate_hz,
            "core:version": VERSION,
            "core:num_channels": 1,
            "core:sha512": sha512,
            "core:extensions": [{"name": OWN, "version": OWN_VERSION, "optional": True}],
            **{f"core:{key}": text.strip() for key, text in texts.items() if text.strip()},
            f"{OWN}:simulated": about.simulated,
            **{f"{OWN}:{key}": value for key, value in about.own.items()},
        },
        "captures": [_capture(one, _index(one, there[0], about.rate_hz)) for one in there],
        "annotations": [_annotation(one) for one in sorted(marks, key=lambda one: one.start)],
    }


def _index(one: Capture, first: Capture, rate_hz: float) -> int:
    """Number of a capture's first sample, counted through the gaps: a reader sees them by it."""
    return first.start + round((one.boot_ns - first.boot_ns) * rate_hz / NS_PER_S)


def _capture(one: Capture, index: int) -> dict[str, object]:
    found: dict[str, object] = {"core:sample_start": one.start, "core:frequency": one.centre_hz}
    found["core:global_index"] = index
    if one.utc_ns is not None:
        moment = _EPOCH + timedelta(microseconds=one.utc_ns // 1000)
        found["core:datetime"] = f"{moment:%Y-%m-%dT%H:%M:%S.%f}Z"
    return found | {f"{OWN}:boot_ns": one.boot_ns}


def _annotation(one: Mark) -> dict[str, object]:
    found: dict[str, object] = {
        "core:sample_start": one.start,
        "core:sample_count": one.samples,
        "core:label": one.label,
    }
    if one.edges_hz is not None:
        found["core:freq_lower_edge"], found["core:freq_upper_edge"] = one.edges_hz
    return found | ({"core:comment": one.comment} if one.comment else {})


def write(
    folder: Path, name: str, about: About, captures: Sequence[Capture], marks: Sequence[Mark],
    raw: Iterable[bytes],
) -> Written:  # fmt: skip
    """Write a pair of files whose names begin with name; OSError leaves neither behind.

    Each is whole or not there: it is written under another name, put on the medium, then renamed.
    The metadata come last, so whoever finds them finds the samples.
    """
    data, meta = folder / f"{name}{DATA}", folder / f"{name}{META}"
    digests = (hashlib.sha256(), hashlib.sha512())
    try:
        with _part(data).open("wb") as file:
            for piece in raw:
                file.write(piece)
                for digest in digests:
                    digest.update(piece)
            size = file.tell()
            _settle(file)
        found = document(about, captures, marks, digests[1].hexdigest())
        body = json.dumps(found, indent=1, ensure_ascii=False).encode() + b"\n"
        with _part(meta).open("wb") as file:
            file.write(body)
            _settle(file)
        _part(data).replace(data)
        _part(meta).replace(meta)
    except OSError:
        for left in (data, meta):
            left.unlink(missing_ok=True)
            _part(left).unlink(missing_ok=True)
        raise
    return Written(digests[0].hexdigest(), hashlib.sha256(body).hexdigest(), size, len(body))


def _part(path: Path) -> Path:
    return path.with_name(path.name + PART)


def _settle(file: BinaryIO) -> None:
    file.flush()
    os.fsync(file.fileno())
