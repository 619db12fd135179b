"""Numbers depend on their place, not on the cut."""

from __future__ import annotations

import numpy as np
import pytest

from simulators import draws


@pytest.mark.parametrize("draw", [draws.uniforms, draws.normals])
@pytest.mark.parametrize("cuts", [[5000], [1, 4999], [3599, 1, 1, 1399], [3600, 1400], [700] * 7])
def test_any_cut_gives_the_same_numbers(draw, cuts) -> None:
    whole = draw(7, draws.NOISE, 250, 5000, 3)
    at, parts = 250, []
    for n in cuts:
        parts.append(draw(7, draws.NOISE, at, n, 3))
        at += n
    assert np.array_equal(np.concatenate(parts), whole[: sum(cuts)])


def test_seeds_streams_and_cells_share_no_numbers() -> None:
    seen = [
        draws.uniforms(seed, stream, cell * draws.CELL, draws.CELL, 1).ravel()
        for seed in (1, 2)
        for stream in (draws.READINGS, draws.NOISE)
        for cell in (-1, 0, 1)
    ]
    assert np.unique(np.concatenate(seen)).size == len(seen) * draws.CELL


def test_numbers_have_their_distribution() -> None:
    """Mean and deviation of n draws lie within five standard errors of the exact ones."""
    n = 20 * draws.CELL
    flat = draws.uniforms(3, draws.READINGS, 0, n, 1)
    bell = draws.normals(3, draws.NOISE, 0, n, 1)
    assert abs(flat.mean() - 0.5) < 5 / np.sqrt(12 * n)
    assert abs(flat.std() - 1 / np.sqrt(12)) < 5 / np.sqrt(12 * n)
    assert abs(bell.mean()) < 5 / np.sqrt(n)
    assert abs(bell.std() - 1) < 5 / np.sqrt(2 * n)


def test_an_empty_stretch_is_empty_and_a_negative_seed_refused() -> None:
    assert draws.normals(1, draws.NOISE, 10, 0, 3).shape == (0, 3)
    with pytest.raises(ValueError, match="seed"):
        draws.generator(-1, draws.NOISE, 0)
