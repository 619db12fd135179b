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
    with pytest.raises(ConfigError, match="number 1 does not join .* choose one capture, 0 to 1"):
        format_from_sigmf(whole, "a")


def captures(*listed: dict[str, Any], **changed: Any) -> dict[str, Any]:
    core = [{f"core:{key}": value for key, value in each.items()} for each in listed]
    return document(**changed) | {"captures": core}


def test_one_capture_is_read_by_its_number() -> None:
    """By hand: 4 bytes a sample; each header lies before the samples of its capture."""
    first = {"sample_start": 0, "frequency": 1e9, "header_bytes": 100}
    second = {"sample_start": 50, "frequency": 2e9, "header_bytes": 8, "datetime": "T"}
    last = {"sample_start": 70, "frequency": 1e9}
    whole = captures(first, second, last, **{"core:trailing_bytes": 6})
    spans = [format_from_sigmf(whole, "a", i).span(1000) for i in range(3)]
    assert spans == [(100, 300), (308, 388), (388, 994)]
    found = format_from_sigmf(whole, "a", 1)
    assert (found.centre_hz, found.start) == (2e9, "T")
    with pytest.raises(ConfigError, match="no number 3, of 3"):
        format_from_sigmf(whole, "a", 3)


def test_captures_that_join_on_are_one() -> None:
    one = {"sample_start": 7, "global_index": 90, "frequency": 1e9, "datetime": "T"}
    two = {"sample_start": 17, "global_index": 100, "frequency": 1e9}
    found = format_from_sigmf(captures(one, two, **{"core:offset": 7}), "a")
    assert (found.span(400), found.start, found.centre_hz) == ((0, 400), "T", 1e9)


@pytest.mark.parametrize(
    "two",
    [{"global_index": 101}, {"header_bytes": 4}, {"frequency": 1.1e9}],
    ids=lambda two: str(two),
)
def test_a_gap_a_header_or_another_centre_divides(two: dict[str, Any]) -> None:
    one = {"sample_start": 0, "global_index": 90, "frequency": 1e9}
    with pytest.raises(ConfigError, match="does not join"):
        format_from_sigmf(captures(one, {"sample_start": 10, "global_index": 100} | two), "a")


def test_samples_before_the_first_capture_belong_to_none() -> None:
    whole = captures({"sample_start": 12}, **{"core:offset": 10})
    assert format_from_sigmf(whole, "a").span(400) == (8, 400)


def test_a_file_shorter_than_its_header_holds_nothing() -> None:
    assert format_from_sigmf(captures({"header_bytes": 100}), "a").span(60) == (100, 100)


@pytest.mark.parametrize(("datatype", "scale"), [("cf32_le", 0.25), ("ci16_le", 1.0)])
def test_only_floats_take_a_scale(datatype: str, scale: float) -> None:
    whole = document(**{"core:datatype": datatype})
    whole["captures"][0]["capture_details:acq_scale_factor"] = 0.25
    assert format_from_sigmf(whole, "a").scale == scale


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
        (document(**{"core:metadata_only": True}), "no samples come"),
        (document(**{"core:offset": -1}), "core:offset"),
        (captures({"sample_start": 5}, {"sample_start": 2}), r"captures\[1\].*before"),
        (captures({"header_bytes": 1.5}), "header_bytes"),
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
