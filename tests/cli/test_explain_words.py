"""What fieldsill explain says where a mean has no uncertainty in dB."""

from __future__ import annotations

import math
from typing import Any

import pytest

from monitor.cli.explain_lines import lines
from monitor.core.flags import Flag, words


def _told(u_db: float, flags: Flag) -> dict[str, Any]:
    field: dict[str, Any] = {"valid_share": 1.0, "flags": words(int(flags)), "k": 1.96}
    for name in ("low", "mean", "high", "max"):
        field |= {f"e2_{name}_v2_per_m2": 4.0, f"e_{name}_v_per_m": 2.0}
    exposure = {
        "set": "a", "population": "b", "scope": "c", "clause": "1", "verdict": "undecided",
        "limit_low_v_per_m": None, "limit_high_v_per_m": None, "ratio_low": 0.1,
        "ratio_mean": 0.1, "ratio_high": 0.1, "expanded_uncertainty_db": u_db, "reasons": ["why"],
    }  # fmt: skip
    return {
        "simulated": False, "end": "1", "start": "0", "averaging_s": 360, "readings": 1,
        "channels": [],
        "temperature": {"min_c": None},
        "field": field | {
            "expanded_uncertainty_db": u_db, "instrument_expanded_db": 2.0,
            "added_e2_v2_per_m2": 0.0, "widened_by_drift_db": 0.0,
        },
        "uncertainty": [], "exposures": [exposure], "documents": {},
        "recomputed": {"count_tables_of_another_version": [], "equal": True},
    }  # fmt: skip


@pytest.mark.parametrize(
    ("u_db", "flags", "count"), [(math.nan, Flag.BELOW_RANGE, 2), (2.0, Flag(0), 0)]
)
def test_below_the_detection_limit_there_is_no_uncertainty_in_db(
    u_db: float, flags: Flag, count: int
) -> None:
    said = "\n".join(lines(_told(u_db, flags)))
    assert said.count("none in dB: below the detection limit") == count
    assert ("U 2 dB, the band apart" in said) is (count == 0)
    assert " - dB" not in said
