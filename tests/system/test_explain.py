"""fieldsill explain over a rehearsal: figures against their sources, and replayed to the bit."""

from __future__ import annotations

import hashlib
import json
import math
import shutil
import sqlite3
from contextlib import closing
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from monitor import limitsets
from monitor.core.exposure import GUARD
from monitor.core.quantities import Z0_OHM
from monitor.record.reader import Record
from monitor.retrace import trace
from monitor.times import text_of
from tests.cli.command import Answer, run
from tests.system.commands import fieldsill

CALIBRATION = Path(__file__).parents[2] / "simulators" / "data" / "board-calibration.toml"
S = 1_000_000_000


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Three hours over the limit: windows are kept at full minutes and where a level is crossed."""
    place = tmp_path_factory.mktemp("rehearsal") / "new"
    done = fieldsill(
        "rehearse", "--scenario", "over-limit", "--history", "3h", "--seed", 3,
        "--exit", "--folder", place,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    return place


@pytest.fixture
def copy(folder: Path, tmp_path: Path) -> Path:
    """The record, to be spoiled."""
    return Path(shutil.copy(folder / "record.db", tmp_path / "record.db"))


def explained(capsys: pytest.CaptureFixture[str], record: Path, *arguments: object) -> Any:
    """The JSON of a window that comes out again."""
    found = run(capsys, ["explain", "--record", record, "--json", *arguments])
    assert found.code == 0, found.err
    return found.document


def spoil(record: Path, statement: str) -> None:
    """Change a record behind its writer's back."""
    with closing(sqlite3.connect(record)) as db, db:
        assert db.execute(statement).rowcount > 0


def kept_ends(record: Path) -> list[tuple[int, int, int]]:
    """(end in boot ns, its UTC, averaging time) of every window."""
    with Record.open(record) as held:
        (boot,) = held.boots()
        rows = held.fields(boot.boot)
    assert boot.utc_offset_ns is not None
    ends = zip(rows.end_ns.tolist(), rows.averaging_s.tolist())
    return [(end, end + boot.utc_offset_ns, averaging_s) for end, averaging_s in ends]


def test_windows_of_every_sort_come_out_again_to_the_bit(folder: Path) -> None:
    """At the start, at full minutes, at a block's end and at a reading inside a block."""
    ends = kept_ends(folder / "record.db")
    crossed = [end for end in ends if end[0] % (60 * S)]
    assert any(end % (10 * S) for end, _, _ in crossed)
    for end_ns, utc_ns, averaging_s in [*crossed, *ends[:3], *ends[3::40], ends[-1]]:
        found = trace(folder / "record.db", utc_ns, averaging_s)
        assert found.kept.end_ns == end_ns
        assert (found.equal, found.differs) == (True, ()), (end_ns, averaging_s, found.why)


def test_what_is_told_of_counts_and_blocks(
    capsys: pytest.CaptureFixture[str], folder: Path
) -> None:
    """Against the raw rows and the window rows of the record, read as a stranger would.

    The view gives thousandths of a dB."""
    end_ns, utc_ns, _ = next(e for e in kept_ends(folder / "record.db") if e[0] == 5400 * S)
    told = explained(capsys, folder / "record.db", "--at", text_of(utc_ns))
    assert (told["end"], told["simulated"]) == (text_of(utc_ns), True)
    with Record.open(folder / "record.db") as held:
        raw = list(held.raw_batches(1, end_ns - 360 * S, end_ns))
    counts = np.concatenate([batch.counts for batch in raw])
    assert told["readings"] == counts.shape[0] == 360
    query = "SELECT name, mean_dbm FROM window_levels WHERE averaging_s = 360 AND end_utc = ?"
    stamp = text_of(utc_ns).removesuffix("Z") + ".000Z"
    with closing(sqlite3.connect(folder / "record.db")) as db:
        means = dict(db.execute(query, (stamp,)))
    for i, channel in enumerate(told["channels"]):
        assert (channel["n"], channel["missing"], channel["blocks"]) == (360, 0, 36)
        assert channel["count_min"] == counts[:, i].min()
        assert channel["count_max"] == counts[:, i].max()
        assert channel["blocks_valid_s"] == channel["valid_s"] == 360.0
        assert channel["mean_dbm"] == pytest.approx(means[channel["channel"]], abs=6e-4)


def test_the_response_and_the_sum_by_hand(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    """E squared per watt at 2.7 GHz by the calibration's rows: antenna 46.2 dB/m, cable between
    1.05 at 2 and 1.35 at 3 GHz, attenuator between 9.95 at 600 MHz and 10.10 at 3 GHz."""
    told = explained(capsys, folder / "record.db")
    cable = 1.05 + 0.3 * math.log(2.7 / 2.0) / math.log(1.5)
    pad = 9.95 + 0.15 * math.log(2.7 / 0.6) / math.log(5.0)
    x = told["channels"][0]
    highest = 50 * 10 ** ((46.2 + cable + pad) / 10)
    assert x["k_high_v2_per_m2_w"] == pytest.approx(highest, rel=1e-9)
    middle = math.sqrt(x["k_low_v2_per_m2_w"] * x["k_high_v2_per_m2_w"])
    assert x["k_mid_v2_per_m2_w"] == pytest.approx(middle)
    e2 = sum(1e-3 * 10 ** (c["mean_dbm"] / 10) * c["k_mid_v2_per_m2_w"] for c in told["channels"])
    field = told["field"]
    assert field["e2_mean_v2_per_m2"] == pytest.approx(e2, rel=1e-12)
    assert field["e_mean_v_per_m"] == pytest.approx(math.sqrt(e2))
    assert field["e_low_v_per_m"] < field["e_mean_v_per_m"] < field["e_high_v_per_m"]


def test_uncertainty_lies_between_what_shares_allow(
    capsys: pytest.CaptureFixture[str], folder: Path
) -> None:
    """GUM 5.2.2: shared errors add, so they stay whole; independent ones shrink, by the root of
    three at most, and are whole where one axis has it all."""
    told = explained(capsys, folder / "record.db")
    lines = told["uncertainty"]
    assert all(line["channels"] == ["x", "y", "z"] for line in lines)
    shared = sum(line["u_db"] ** 2 for line in lines if line["shared"])
    single = sum(line["u_db"] ** 2 for line in lines if not line["shared"])
    u = told["field"]["instrument_expanded_db"] / told["field"]["k"]
    assert math.sqrt(shared + single / 3) <= u * (1 + 1e-9)
    assert u <= math.sqrt(shared + single) * (1 + 1e-9)


def test_limits_and_verdicts(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    """The strictest of the set's rows, E or S of a plane wave, by fieldsill limits; and the
    verdict's guard of 1.64 u (one-sided 95 %, JCGM 106)."""
    told = explained(capsys, folder / "record.db", "--averaging", "1800")
    own = next(
        one
        for one in told["exposures"]
        if (one["set"], one["population"]) == ("icnirp-2020", "general_public")
    )
    strictest = []
    for f in ("700MHz", "2.7GHz"):
        asked = ["limits", "--set", "icnirp-2020", "--population", "general_public"]
        limits = run(capsys, [*asked, "--frequency", f, "--json"]).document["limits"]
        as_e = {"E": lambda e: e, "S": lambda s: math.sqrt(s * Z0_OHM)}
        whole = [one for one in limits if one["scope"] == "whole_body" and one["quantity"] in as_e]
        strictest.append(min(as_e[one["quantity"]](one["value"]) for one in whole))
    assert own["limit_low_v_per_m"] == pytest.approx(strictest[0], rel=1e-9)
    assert own["limit_high_v_per_m"] == pytest.approx(strictest[1], rel=1e-9)
    u = own["expanded_uncertainty_db"] / own["k"]
    low_db = 10 * math.log10(own["ratio_low"]) - GUARD * u
    high_db = 10 * math.log10(own["ratio_high"]) + GUARD * u
    expected = "exceeds" if low_db > 0 else "conforms" if high_db < 0 else "undecided"
    assert own["verdict"] == expected
    assert own["reasons"]


def test_documents_are_those_of_the_time(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    documents = explained(capsys, folder / "record.db")["documents"]

    def sha256(body: bytes) -> str:
        return hashlib.sha256(body).hexdigest()

    assert documents["site"] == sha256((folder / "site.toml").read_bytes())
    assert documents["calibration"] == sha256(CALIBRATION.read_bytes())
    assert documents["icnirp-2020"] == sha256(limitsets.document("icnirp-2020"))


def test_the_window_is_the_last_before_the_time(
    capsys: pytest.CaptureFixture[str], folder: Path
) -> None:
    _, utc_ns, _ = next(e for e in kept_ends(folder / "record.db") if e[0] == 5400 * S)
    late = explained(capsys, folder / "record.db", "--at", text_of(utc_ns + 2 * S))
    assert late["end"] == text_of(utc_ns)
    newest = explained(capsys, folder / "record.db")
    assert newest["end_boot_ns"] == max(end for end, _, _ in kept_ends(folder / "record.db"))
    far = explained(capsys, folder / "record.db", "--at", "2254-01-01T00:00:00Z")
    assert far == newest


@pytest.mark.parametrize(
    ("statement", "differs"),
    [
        ("UPDATE fields SET e2_mean = e2_mean * 1.000000001", ["fields.e2_mean"]),
        ("UPDATE windows SET covered_ns = covered_ns - 1", ["windows.covered_ns"]),
        ("UPDATE exposures SET verdict = 1 - verdict % 2", ["exposures.verdict"]),
    ],
)
def test_a_figure_that_was_changed_is_told(
    capsys: pytest.CaptureFixture[str], copy: Path, statement: str, differs: list[str]
) -> None:
    spoil(copy, statement)
    found = run(capsys, ["explain", "--record", copy, "--json"])
    assert found.code == 1
    assert found.document["recomputed"]["equal"] is False
    assert found.document["recomputed"]["differs"] == differs
    out = run(capsys, ["explain", "--record", copy]).out
    assert f"NOT EQUAL in {differs[0]}" in out


@pytest.mark.parametrize(
    ("statement", "why"),
    [
        (
            "DELETE FROM documents WHERE kind = 'calibration'",
            "the record does not hold the document 'calibration'",
        ),
        (
            "UPDATE documents SET body = cast(body || x'0a' AS BLOB) WHERE kind = 'site'",
            "the document 'site' in the record is damaged",
        ),
    ],
)
def test_without_a_document_the_stored_figures_stand_alone(
    capsys: pytest.CaptureFixture[str], copy: Path, statement: str, why: str
) -> None:
    before = explained(capsys, copy)
    spoil(copy, statement)
    told = explained(capsys, copy)
    assert told["field"] == before["field"]
    assert told["recomputed"]["equal"] is None
    assert why in told["recomputed"]["why"]
    assert told["uncertainty"] is None
    out = run(capsys, ["explain", "--record", copy]).out
    assert f"NOT worked out again: {why}" in out


def test_for_people(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    found = run(capsys, ["explain", "--record", folder / "record.db"])
    assert found.code == 0
    assert found.out.startswith("SIMULATED: these figures are invented\n")
    assert "1. Raw counts: 360 readings" in found.out
    assert "Worked out again from the raw counts: equal to the bit." in found.out
    assert "local codes" in found.out


def mistaken(
    capsys: pytest.CaptureFixture[str], record: Path, *arguments: object
) -> tuple[int, str]:
    found: Answer = run(capsys, ["explain", "--record", record, *arguments])
    assert found.out == ""
    return found.code, found.one_line


def test_mistakes(capsys: pytest.CaptureFixture[str], folder: Path, tmp_path: Path) -> None:
    record = folder / "record.db"
    code, line = mistaken(capsys, record, "--at", "1999-01-01T00:00:00Z")
    assert code == 2
    assert "no window of 360 s ends at or before 1999-01-01T00:00:00Z" in line
    assert mistaken(capsys, record, "--at", "1686-01-01T00:00:00Z")[0] == 2
    assert "not an RFC 3339 time" in mistaken(capsys, record, "--at", "noon")[1]
    assert "no window of 77 s" in mistaken(capsys, record, "--averaging", 77)[1]
    assert mistaken(capsys, record, "--averaging", 0)[0] == 2
    assert mistaken(capsys, tmp_path / "none.db")[0] == 3


def test_a_drift_found_later_stands_beside_the_stored_uncertainty(
    capsys: pytest.CaptureFixture[str], copy: Path
) -> None:
    before = explained(capsys, copy)
    assert before["field"]["widened_by_drift_db"] == 0.0
    drift = {"documents": [before["documents"]["calibration"]], "next": "later", "drift_db": 0.9}
    body, boot, end_ns = json.dumps(drift), before["boot"], before["end_boot_ns"]
    spoil(
        copy,
        "INSERT INTO events (boot, boot_ns, kind, name, body) VALUES "
        f"({boot}, {end_ns}, 'calibration', 'drift', '{body}')",
    )
    after = explained(capsys, copy)
    field = after["field"]
    u, k = field["expanded_uncertainty_db"], field["k"]
    assert u == before["field"]["expanded_uncertainty_db"]
    wider = k * math.sqrt((u / k) ** 2 + 0.9**2 / 3)
    assert field["expanded_uncertainty_with_drift_db"] == pytest.approx(wider, rel=1e-12)
    text = run(capsys, ["explain", "--record", copy]).out
    assert "a later calibration found a drift of 0.9 dB" in text
