"""Terms that are never zero in silence, and the survey that stands for missing axes."""

from __future__ import annotations

from pathlib import Path

import pytest

from monitor.calfile import load_chain
from monitor.calterms import ASSUMED_DB
from monitor.config import Band, Channel
from monitor.core.calibration import Chain
from monitor.core.exposure import OUTSIDE_BUDGET
from monitor.core.flags import Flag
from tests.monitor.test_calfile import FILE, THREE
from tests.terms import KINDS, confirmed

BARE = FILE.replace(confirmed(), "")
ALWAYS = {"out_of_band", "isotropy", "near_field", "own_body", "drift"}
ASSUMED = int(Flag.ASSUMED_TERMS)
COMPONENT = int(Flag.COMPONENT_ONLY)


def chain(
    folder: Path,
    terms: str,
    channels: tuple[Channel, ...] = THREE,
    polarisation: str = "undeclared",
) -> Chain:
    """The chain of the bare file and those lines."""
    path = folder / "calibration.toml"
    path.write_text(BARE + terms, encoding="utf-8")
    band = Band("main", 8e8, 2e9, polarisation=polarisation)
    return load_chain(path, channels, {"main": band})


def assumed(held: Chain) -> dict[str, float]:
    """Kind and value of the lines that nobody wrote, alike on every channel."""
    found = [
        {line.kind: line.value for line in lines if line.name.endswith("(assumed)")}
        for lines in held.contributions
    ]
    assert all(one == found[0] for one in found)
    return found[0]


@pytest.mark.parametrize(
    ("axes", "polarisation", "more", "flags"),
    [
        (3, "undeclared", {"cross_axis"}, ASSUMED),
        (3, "survey", {"cross_axis"}, ASSUMED),
        (2, "undeclared", {"cross_axis"}, ASSUMED | COMPONENT),
        (2, "survey", {"cross_axis", "polarisation"}, ASSUMED),
        (1, "undeclared", set(), ASSUMED | COMPONENT),
        (1, "survey", {"polarisation"}, ASSUMED),
    ],
)
def test_what_is_left_out_is_assumed(
    tmp_path: Path, axes: int, polarisation: str, more: set[str], flags: int
) -> None:
    held = chain(tmp_path, "", THREE[:axes], polarisation)
    assert assumed(held) == {kind: ASSUMED_DB[kind] for kind in ALWAYS | more}
    assert held.flags == flags
    assert all(
        line.shared and line.distribution == "rectangular"
        for line in held.contributions[0]
        if line.kind in ASSUMED_DB
    )


def test_assumed_terms_forbid_conformity() -> None:
    assert OUTSIDE_BUDGET & Flag.ASSUMED_TERMS


@pytest.mark.parametrize("kind", sorted(ALWAYS | {"cross_axis"}))
def test_a_line_of_zero_confirms_its_kind_alone(tmp_path: Path, kind: str) -> None:
    held = chain(tmp_path, confirmed(*(set(KINDS) - {kind})))
    assert assumed(held) == {kind: ASSUMED_DB[kind]}
    assert held.flags == ASSUMED
    assert chain(tmp_path, confirmed()).flags == 0


def test_a_line_for_one_axis_confirms_that_axis_alone(tmp_path: Path) -> None:
    own = confirmed("drift").replace("value = 0", 'value = 0\naxis = "x"')
    held = chain(tmp_path, confirmed(*(set(KINDS) - {"drift"})) + own)
    names = [[line.name for line in lines if line.kind == "drift"] for lines in held.contributions]
    assert names == [["drift, none"], ["drift (assumed)"], ["drift (assumed)"]]
    assert held.flags == ASSUMED


def test_a_surveyed_axis_with_its_line_is_whole(tmp_path: Path) -> None:
    held = chain(tmp_path, confirmed(), THREE[2:], "survey")
    assert held.flags == 0
    assert "polarisation" in [line.kind for line in held.contributions[0]]


def test_one_band_without_a_survey_is_a_component(tmp_path: Path) -> None:
    """Two bands of one axis each: the survey of one says nothing about the other."""
    path = tmp_path / "calibration.toml"
    path.write_text(FILE, encoding="utf-8")
    bands = {"a": Band("a", 8e8, 1e9, polarisation="survey"), "b": Band("b", 1e9, 2e9)}
    channels = [Channel(name, "x", name) for name in bands]
    assert load_chain(path, channels, bands).flags == COMPONENT
