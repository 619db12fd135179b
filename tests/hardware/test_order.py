"""Times out of order: against trying every way to leave some out, and a million rows in time."""

from __future__ import annotations

import time
from itertools import combinations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from hardware.order import misplaced


def increases(times):
    return all(a < b for a, b in zip(times, times[1:]))


@given(st.lists(st.integers(0, 9), max_size=9))
def test_the_fewest_are_left_out(times):
    """Source: the longest increasing choice among all choices."""
    out = misplaced(np.array(times, np.int64)).tolist()
    kept = [t for i, t in enumerate(times) if i not in out]
    assert increases(kept)
    assert out == sorted(set(out))
    longer = combinations(times, len(kept) + 1)
    assert not any(increases(chosen) for chosen in longer)


def test_of_equal_times_the_first_stays():
    assert misplaced(np.array([0, 5, 5, 5, 9])).tolist() == [2, 3]


def test_a_million_rows_behind_a_stray_one():
    times = np.concatenate([[10**9], np.arange(10**6)])
    begun = time.process_time()
    assert misplaced(times).tolist() == [0]
    assert time.process_time() - begun < 10.0
