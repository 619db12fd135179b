"""What is taken from SigMF metadata, and what is refused."""

from __future__ import annotations

from typing import Any

import pytest

from monitor.core.errors import ConfigError
from monitor.core.sigmf import IqFormat, datatype_by_extension, format_from_sigmf


def document(**changed: Any) -> dict[str, Any]:
    whole = {"core:datatype": "ci16_le", "core:sample_rate": 2e6, "core:version": "1.0.0"}
    return {
        "global": {k: v for k, v in (whole | changed).items() if v is not None},
        "captures": [{"core:sample_start": 0, "core:frequency": 1.8e9}],
        "annotations": [],
    }


def test_format_of_a_recording() -> None:
    assert format_from_sigmf(document(), "a.sigmf-meta") == IqFormat("ci16_le", 2e6, 1.8e9, 0)


def test_rate_and_centre_may_be_unknown() -> None:
    bare = {"global": {"core:datatype": "cu8"}}
    assert format_from_sigmf(bare, "a") == IqFormat("cu8", None, None, 0)


def test_bytes_that_are_no_samples_and_the_time_of_recording() -> None:
    whole = document(**{"core:trailing_bytes": 16})
    whole["captures"][0] |= {"core:header_bytes": 128, "core:datetime": "2031-05-01T07:12:00Z"}
    found = format_from_sigmf(whole, "a")
    assert (found.header_bytes, found.trailing_bytes) == (128, 16)
    assert found.start == "2031-05-01T07:12:00Z"


def test_a_recording_tuned_on_the_way_is_refused() -> None:
    whole = document()
    whole["captures"].append({"core:sample_start": 10, "core:frequency": 1.9e9})
    with pytest.raises(ConfigError, match="the centre changes"):
        format_from_sigmf(whole, "a")


@pytest.mark.parametrize(
    ("wrong", "says"),
    [
        ([], "JSON object"),
        ({}, "global"),
        ({"global": []}, "global"),
        (document(**{"core:datatype": None}), "datatype: missing"),
        (document(**{"core:datatype": "rf64_le"}), "rf64_le"),
        (document(**{"core:sample_rate": 0}), "core:sample_rate"),
        (document(**{"core:sample_rate": "fast"}), "core:sample_rate"),
        (document(**{"core:num_channels": 2}), "one channel"),
    ],
)
def test_what_cannot_be_read_is_refused(wrong: object, says: str) -> None:
    with pytest.raises(ConfigError, match=says):
        format_from_sigmf(wrong, "a.sigmf-meta")


@pytest.mark.parametrize(
    ("name", "datatype"),
    [("a.cu8", "cu8"), ("b.1.CF32", "cf32"), ("c.bin", None), ("cu8", None), ("d.wav", None)],
)
def test_datatype_by_extension(name: str, datatype: str | None) -> None:
    assert datatype_by_extension(name) == datatype
