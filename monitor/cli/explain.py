"""fieldsill explain: how one stored figure came about, and whether it comes out again."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import click
import numpy as np

from monitor.cli import explain_temperature
from monitor.cli.averages_record import site_record, utc_ns_asked
from monitor.cli.explain_lines import lines
from monitor.cli.output import print_json
from monitor.core.budget import Contribution
from monitor.core.caldrift import widened_db
from monitor.core.exposure import Verdict, reasons
from monitor.core.flags import words
from monitor.core.interval import total_db
from monitor.core.limits import ratio_per_e2
from monitor.core.quantities import dbm_from_w
from monitor.core.readings import MISSING, NS_PER_S
from monitor.retrace import Basis, Kept, Traced, trace
from monitor.times import text_of

Document = dict[str, Any]


@click.command("explain")
@click.option("--record", type=click.Path(path_type=Path), help="Default: the site's.")
@click.option("--at", help="RFC 3339; the window that ends then or last before. Default: newest.")
@click.option("--averaging", default=360, type=click.IntRange(1, 86_400), help="Seconds.")
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def command(record: Path | None, at: str | None, averaging: int, as_json: bool) -> int:
    """How one average came about: counts, chain, window, limit, uncertainty.

    It is worked out again from the raw counts through the files that the record holds. Exit code 1
    where the stored figure is another.
    """
    at_utc_ns = None if at is None else utc_ns_asked(at, "--at", 0)
    traced = trace(record or site_record(), at_utc_ns, averaging)
    told = _document(traced)
    if as_json:
        print_json(told)
    else:
        for line in lines(told):
            click.echo(line)
    return 1 if traced.equal is False else 0


def _document(traced: Traced) -> Document:
    kept, basis = traced.kept, traced.basis
    span_ns = kept.averaging_s * NS_PER_S
    return {
        "simulated": kept.simulated,
        "boot": kept.boot.boot,
        "end_boot_ns": kept.end_ns,
        "start": None if kept.utc_ns is None else text_of(kept.utc_ns - span_ns),
        "end": None if kept.utc_ns is None else text_of(kept.utc_ns),
        "averaging_s": kept.averaging_s,
        "readings": sum(batch.n for batch in kept.raw),
        "temperature": explain_temperature.of_readings(kept),
        "channels": [_channel(kept, basis, i) for i in range(len(kept.channels))],
        "field": _field(kept),
        "uncertainty": None if basis is None else _budget(basis),
        "exposures": [_exposure(kept, basis, i) for i in range(kept.exposures.scope.size)],
        "documents": dict(kept.hashes),
        "recomputed": {
            "equal": traced.equal,
            "why": traced.why or None,
            "differs": list(traced.differs),
            "count_tables_of_another_version": None if basis is None else list(basis.other_tables),
        },
    }


def _channel(kept: Kept, basis: Basis | None, index: int) -> Document:
    """Counts, blocks, power and response of one channel."""
    row = kept.channels[index]
    columns = [batch.counts[:, index] for batch in kept.raw if batch.n]
    counts = np.concatenate(columns) if columns else np.empty(0, np.int32)
    given = counts[counts != MISSING]
    mine = kept.windows.channel == index
    covered_ns, energy = kept.windows.covered_ns[mine].sum(), kept.windows.energy_w_ns[mine].sum()
    blocks = kept.blocks.channel == index
    return {
        "channel": row.name,
        "axis": row.axis or None,
        "band": row.band,
        "n": int(given.size),
        "missing": int(counts.size - given.size),
        "count_min": int(given.min()) if given.size else None,
        "count_max": int(given.max()) if given.size else None,
        "count_table": kept.hashes.get(f"counts {row.name}"),
        "blocks": int(np.count_nonzero(blocks)),
        "blocks_valid_s": float(kept.blocks.covered_ns[blocks].sum() / NS_PER_S),
        "valid_s": float(covered_ns / NS_PER_S),
        "mean_dbm": dbm_from_w(float(energy / covered_ns)) if energy > 0 < covered_ns else None,
        **explain_temperature.taken_off(kept, basis, index),
        **_response(basis, index),
    }


def _response(basis: Basis | None, index: int) -> Document:
    """E squared per watt over the channel's band."""
    keys = ("low_hz", "high_hz", "k_low_v2_per_m2_w", "k_mid_v2_per_m2_w", "k_high_v2_per_m2_w")
    if basis is None or index >= basis.here.channels:
        return dict.fromkeys(keys)
    chain = basis.here.chain
    f, k = chain.frequencies_hz[index], chain.k[index]
    figures = (f.min(), f.max(), k.min(), chain.k_mid[index], k.max())
    return dict(zip(keys, map(float, figures)))


def _field(kept: Kept) -> Document:
    row = kept.field
    document: Document = {}
    for name in ("low", "mean", "high", "max"):
        e2 = float(getattr(row, f"e2_{name}")[0])
        document[f"e2_{name}_v2_per_m2"] = e2
        document[f"e_{name}_v_per_m"] = math.sqrt(e2)
    total = total_db(row.u_db, row.e2_mean, row.added_e2, row.flags)
    return document | {
        "expanded_uncertainty_db": float(total[0]),
        "instrument_expanded_db": float(row.u_db[0]),
        "added_e2_v2_per_m2": float(row.added_e2[0]),
        "k": float(row.k[0]),
        "widened_by_drift_db": kept.drift_db,
        "expanded_uncertainty_with_drift_db": float(
            widened_db(total, row.k, np.array([kept.drift_db]))[0]
        ),
        "valid_share": float(row.valid_share[0]),
        "observed_share": float(row.observed_share[0]),
        "flags": words(int(row.flags[0])),
    }


def _budget(basis: Basis) -> list[Document]:
    """The uncertainty budget; one that all channels have alike stands once."""
    found: dict[Contribution, Document] = {}
    for channel, budget in zip(basis.site.channels, basis.here.chain.contributions):
        for line in budget:
            entry = {
                "name": line.name,
                "value": line.value,
                "sensitivity": line.sensitivity,
                "distribution": line.distribution,
                "degrees_of_freedom": line.degrees_of_freedom,
                "u_db": line.u,
                "shared": line.shared,
                "kind": line.kind or None,
                "channels": [],
            }
            found.setdefault(line, entry)["channels"].append(channel.name)
    return list(found.values())


def _exposure(kept: Kept, basis: Basis | None, i: int) -> Document:
    rows = kept.exposures
    scope = kept.scopes[int(rows.scope[i])]
    limits = None
    if basis is not None and scope.set_id in basis.sets:
        grids = np.concatenate(basis.here.chain.frequencies_hz)
        limits = 1.0 / np.sqrt(ratio_per_e2(basis.sets[scope.set_id], scope, grids))
    return {
        "set": scope.set_id,
        "edition": scope.edition,
        "population": scope.population,
        "scope": scope.scope,
        "clause": scope.clause,
        "verified": scope.verified,
        "limit_low_v_per_m": None if limits is None else float(limits.min()),
        "limit_high_v_per_m": None if limits is None else float(limits.max()),
        "ratio_low": float(rows.ratio_low[i]),
        "ratio_mean": float(rows.ratio_mean[i]),
        "ratio_high": float(rows.ratio_high[i]),
        "expanded_uncertainty_db": float(
            total_db(rows.u_db, rows.ratio_mean, rows.added_ratio, kept.field.flags)[i]
        ),
        "k": None if basis is None else basis.here.k_ratio,
        "verdict": Verdict(int(rows.verdict[i])).name.lower(),
        "reasons": None if basis is None else _reasons(kept, basis, i, scope.verified),
    }


def _reasons(kept: Kept, basis: Basis, i: int, verified: bool) -> list[str]:
    """Why the stored figures give that verdict."""
    rows, here = kept.exposures, basis.here
    return reasons(
        float(rows.ratio_low[i]),
        float(rows.ratio_mean[i]),
        float(rows.ratio_high[i]),
        float(rows.u_db[i]) / here.k_ratio,
        here.k_ratio,
        float(kept.field.valid_share[0]),
        int(kept.field.flags[0]),
        verified=verified,
        field_region=here.field_region,
        outside_excluded=here.outside_excluded,
        lowest_hz=here.lowest_hz,
        added=float(rows.added_ratio[i]) / here.k_ratio,
        seen_share=float(kept.windows.covered_ns.max(initial=0)) / (kept.averaging_s * NS_PER_S),
    )
