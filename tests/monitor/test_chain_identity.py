"""Figures under different corrections are of different chains and may not be added."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from monitor.wiring import chain_identity
from tests.core.stations import chain


def test_noise_and_temperature_tables_are_part_of_a_chain() -> None:
    plain = chain(2)
    warm = np.array([0.0, 40.0]), np.array([-1.0, 1.0])
    warmer = np.array([0.0, 40.0]), np.array([-1.0, 1.1])
    others = [
        replace(plain, noise_w=np.array([0.0, 1e-12])),
        replace(plain, temperature=(warm, None)),
        replace(plain, temperature=(None, warm)),
        replace(plain, temperature=(warm, warm)),
        replace(plain, temperature=(warm, warmer)),
    ]
    names = [chain_identity(one) for one in (plain, *others)]
    assert len(set(names)) == len(names)
    again = replace(plain, temperature=((warm[0].copy(), warm[1].copy()), None))
    assert chain_identity(again) == names[2]


def test_no_table_for_any_channel_is_no_tables() -> None:
    """Both leave every reading as it is, so their figures may be added."""
    plain = chain(2)
    assert chain_identity(replace(plain, temperature=(None, None))) == chain_identity(plain)
