"""Raw counts come back to the bit; a damaged blob is one clear error."""

from __future__ import annotations

import zlib

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from monitor.core.errors import RecordError
from monitor.core.readings import MISSING, Batch, empty_batch
from monitor.record.packing import _COLUMN, pack, unpack
from tests.record.making import check_same, raw

INT32 = st.integers(-(2**31), 2**31 - 1)


@st.composite
def batches(draw: st.DrawFn) -> Batch:
    """Any batch that the type allows, extremes and missing counts among them."""
    n, channels = draw(st.integers(0, 40)), draw(st.integers(1, 5))
    times = draw(hnp.arrays(np.int64, n, elements=st.integers(-(2**63), 2**63 - 1)))
    counts = draw(hnp.arrays(np.int32, (n, channels), elements=INT32))
    flags = draw(hnp.arrays(np.int32, n, elements=INT32))
    temperature_dc = draw(hnp.arrays(np.int32, n, elements=INT32))
    return Batch(times, counts, flags, draw(st.integers(0, 2**62)), temperature_dc)


@given(batches())
@settings(max_examples=300, deadline=None)
def test_every_batch_comes_back_to_the_bit(batch: Batch) -> None:
    check_same(unpack(pack(batch), batch.now_ns), batch)


@pytest.mark.parametrize("n", [0, 1, 2, 3, 3600])
def test_lengths(n: int) -> None:
    batch = raw(5, n) if n else empty_batch(3, 17)
    check_same(unpack(pack(batch), batch.now_ns), batch)


def test_missing_counts_among_others() -> None:
    counts = np.array([[MISSING, 2047], [2048, MISSING], [MISSING, MISSING]], np.int32)
    batch = Batch(np.array([1, 2, 3], np.int64), counts, np.zeros(3, np.int32), 4)
    assert unpack(pack(batch), 4).counts.tolist() == counts.tolist()


def test_even_times_and_quiet_counts_need_less_than_a_byte_and_a_half_a_count() -> None:
    """12-bit counts with a noise of 4: entropy of a normal is 4.05 bits at 4 steps rms."""
    rng = np.random.default_rng(3)
    counts = (2000 + rng.normal(0, 4, (3600, 3))).astype(np.int32)
    times = np.arange(3600, dtype=np.int64) * 10**9
    batch = Batch(times, counts, np.zeros(3600, np.int32), int(times[-1]))
    assert len(pack(batch)) < 1.5 * counts.size


def test_bytes_are_those_of_the_format_page() -> None:
    """By hand from FORMAT.md: two readings, one channel: steps of 10 ns and 3; 21.3 degrees."""
    batch = Batch(
        np.array([100, 110], np.int64), np.array([[7], [10]], np.int32),
        np.zeros(2, np.int32), 110, np.array([213, 213], np.int32),
    )  # fmt: skip
    body = pack(batch)
    assert body[0] == 2
    column = bytes.fromhex
    assert zlib.decompress(body[1:]) == (
        column("02000000 0100")
        + column("6400000000000000 0a00000000000000 00")
        + column("0000000000000000 0000000000000000 00")
        + column("d500000000000000 0000000000000000 00")
        + column("0700000000000000 0300000000000000 00")
    )


@pytest.mark.parametrize("temperature_dc", [MISSING, 213])
def test_a_temperature_that_stays_costs_a_few_bytes_a_commit(temperature_dc: int) -> None:
    """17 bytes before they are compressed, whatever the number of readings; our choice of bound."""
    rng = np.random.default_rng(5)
    counts = (2000 + rng.normal(0, 4, (10, 3))).astype(np.int32)
    batch = Batch(
        np.arange(10, dtype=np.int64) * 10**9, counts, np.zeros(10, np.int32), 10**10,
        np.full(10, temperature_dc, np.int32),
    )  # fmt: skip
    body = pack(batch)
    data = zlib.decompress(body[1:])
    column = _COLUMN.pack(temperature_dc % 2**64, 0, 0)
    assert data.count(column) == 1
    without = zlib.compress(data.replace(column, b""), 6)
    assert len(body) - 1 - len(without) <= 12


@pytest.mark.parametrize("damage", [b"", b"\x02abc", b"\x01abc", None])
def test_a_damaged_blob_is_one_clear_error(damage: bytes | None) -> None:
    body = pack(raw(0, 50))[:-20] if damage is None else damage
    with pytest.raises(RecordError, match="boot time 99 ns"):
        unpack(body, 99)
