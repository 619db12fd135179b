"""What fieldsill explain prints for people, of its JSON document."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

from monitor.cli.explain_temperature import line_of_readings, words_of_channel
from monitor.core.flags import UPPER_BOUND, words
from monitor.core.limits import frequency_text

Document = dict[str, Any]
NO_DB = "none in dB: below the detection limit"
UPPER_WORDS = frozenset(words(int(UPPER_BOUND)))
VERDICTS = {"exceeds": "exceeds", "conforms": "conforms", "undecided": "cannot be decided"}
CAUTION = (
    "At this instrument's place. Which limits bind is for local codes and licensed practice to say."
)


def lines(told: Document) -> Iterator[str]:
    """From the raw counts to the verdicts, then what it rests on and whether it comes out again."""
    if told["simulated"]:
        yield "SIMULATED: these figures are invented"
    if told["end"] is None:
        when = f"up to {told['end_boot_ns'] / 1e9:.10g} s of boot {told['boot']}, UTC not known"
    else:
        when = f"{told['start']} to {told['end']}"
    yield f"Mean over {told['averaging_s']} s, {when}"
    yield f"\n1. Raw counts: {told['readings']} readings"
    for channel in told["channels"]:
        yield f"  {_counts(channel)}"
    yield f"  {line_of_readings(told['temperature'])}"
    yield "\n2. Power at the detector's port, by each channel's count table, in blocks of 10 s"
    for channel in told["channels"]:
        yield f"  {_power(channel)}{words_of_channel(channel)}"
    yield "\n3. Response: E squared per watt over the band, V2/m2 per W"
    for channel in told["channels"]:
        yield f"  {_response(channel)}"
    yield from _field(told["field"])
    yield from _budget(told["uncertainty"], told["field"])
    yield "\n6. Against the limits"
    for exposure in told["exposures"]:
        yield from _exposure(exposure, _below(told["field"]))
    if not told["exposures"]:
        yield f"  no limit is averaged over {told['averaging_s']} s"
    yield "\n7. Files it rests on, by their SHA-256"
    for name, digest in told["documents"].items():
        yield f"  {name:<24} {digest}"
    yield ""
    yield from _recomputed(told["recomputed"])
    yield CAUTION


def _counts(channel: Document) -> str:
    axis = f" (axis {channel['axis']})" if channel["axis"] else ""
    missing = f", {channel['missing']} without a figure" if channel["missing"] else ""
    span = "none" if channel["count_min"] is None else f"{channel['count_min']} to "
    span += "" if channel["count_max"] is None else f"{channel['count_max']}"
    return f"{channel['channel']}{axis}: n = {channel['n']}, {span}{missing}"


def _power(channel: Document) -> str:
    table = channel["count_table"]
    mean = "no valid part" if channel["mean_dbm"] is None else f"{channel['mean_dbm']:.3f} dBm"
    return (
        f"{channel['channel']}: {channel['blocks']} blocks, {channel['blocks_valid_s']:.10g} s"
        f" valid in them; mean of the window {mean} over {channel['valid_s']:.10g} s"
        f" (table {table[:12] if table else 'unknown'})"
    )


def _response(channel: Document) -> str:
    if channel["low_hz"] is None:
        return f"{channel['channel']}: unknown"
    low, mid, high = (channel[f"k_{name}_v2_per_m2_w"] for name in ("low", "mid", "high"))
    band = " to ".join(frequency_text(channel[key]) for key in ("low_hz", "high_hz"))
    return f"{channel['channel']}, {band}: {low:.5g} low, {mid:.5g} middle, {high:.5g} high"


def _field(field: Document) -> Iterator[str]:
    yield "\n4. Field strength: power times response, summed over the axes"
    for name, what in (
        ("low", "gaps as nothing, smallest response"),
        ("mean", "valid part, middle response"),
        ("high", "gaps at the highest reading, largest response"),
        ("max", "largest readings of the axes together"),
    ):
        e2, e = field[f"e2_{name}_v2_per_m2"], field[f"e_{name}_v_per_m"]
        yield f"  {name:<5} E2 {_number(e2):>10} V2/m2   E {_number(e):>8} V/m   {what}"
    yield f"  valid for {field['valid_share']:.1%} of the time"
    for word in field["flags"]:
        yield f"  Note: {word}"


def _budget(budget: list[Document] | None, field: Document) -> Iterator[str]:
    yield "\n5. Uncertainty budget, dB"
    if budget is None:
        yield "  its lines are not known"
    for line in budget or []:
        shared = "shared by" if line["shared"] else "each of"
        yield (
            f"  {line['name']:<44} {line['value']:>7.3f} {line['distribution']:<12}"
            f" u {line['u_db']:.3f}  {shared} {', '.join(line['channels'])}{_known(line)}"
        )
    u_db = _number(field["expanded_uncertainty_db"])
    yield (
        f"  what multiplies: {_number(field['instrument_expanded_db'])} dB; what adds (noise taken"
        f" off, scatter of a varying signal): {_number(field['added_e2_v2_per_m2'])} V2/m2"
    )
    if math.isfinite(field["expanded_uncertainty_db"]) or not _below(field):
        yield f"  expanded uncertainty of the mean {u_db} dB at 95 %, k = {_number(field['k'])}"
    else:
        yield f"  expanded uncertainty of the mean: {NO_DB}"
    if field["widened_by_drift_db"]:
        yield (
            f"  a later calibration found a drift of {field['widened_by_drift_db']:.2g} dB: with it"
            f" {_number(field['expanded_uncertainty_with_drift_db'])} dB; verdicts stand as stored"
        )


def _known(line: Document) -> str:
    """What makes a line other than one in dB whose value is exactly known."""
    said = ""
    if line["sensitivity"] != 1.0:
        said += f"; {line['sensitivity']:.4g} dB per unit of its value"
    if math.isfinite(line["degrees_of_freedom"]):
        said += f"; {line['degrees_of_freedom']:.4g} degrees of freedom"
    return said


def _below(field: Document) -> bool:
    """Whether the mean is a bound that it stays below."""
    return not UPPER_WORDS.isdisjoint(field["flags"])


def _exposure(exposure: Document, below: bool) -> Iterator[str]:
    population, scope = (exposure[key].replace("_", " ") for key in ("population", "scope"))
    verdict = VERDICTS[exposure["verdict"]]
    yield f"  {exposure['set']}, {population}, {scope} ({exposure['clause']}): {verdict}"
    low, high = exposure["limit_low_v_per_m"], exposure["limit_high_v_per_m"]
    if low is not None:
        yield f"    limit over the band {low:.4g} to {high:.4g} V/m"
    ratios = " / ".join(_number(exposure[f"ratio_{name}"]) for name in ("low", "mean", "high"))
    u_db = _number(exposure["expanded_uncertainty_db"])
    if math.isfinite(exposure["expanded_uncertainty_db"]) or not below:
        yield f"    exposure ratio low / mean / high {ratios}; U {u_db} dB, the band apart"
    else:
        yield f"    exposure ratio low / mean / high {ratios}; U: {NO_DB}"
    for reason in exposure["reasons"] or ["why is not known"]:
        yield f"    {reason}"


def _recomputed(recomputed: Document) -> Iterator[str]:
    tables = recomputed["count_tables_of_another_version"]
    if recomputed["equal"]:
        yield "Worked out again from the raw counts: equal to the bit."
    elif recomputed["equal"] is None:
        yield f"NOT worked out again: {recomputed['why']}"
    else:
        why = f" ({recomputed['why']})" if recomputed["why"] else ""
        yield f"Worked out again: NOT EQUAL in {', '.join(recomputed['differs'])}{why}"
    if tables:
        yield f"Count tables as stored; this version makes others for {', '.join(tables)}."


def _number(value: float) -> str:
    return f"{value:.4g}" if math.isfinite(value) else "-"
