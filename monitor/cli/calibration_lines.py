"""The documents of fieldsill calibration as lines for people."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from monitor.core.limits import frequency_text
from monitor.marking import DUE_SOON_DAYS

Entry = Mapping[str, Any]


def shown(document: Entry) -> Iterator[str]:
    """A calibration file, from its certificate to its uncertainty."""
    yield f"{document['id']}, calibrated {document['date']} by {document['laboratory']}"
    yield f"  certificate {document['certificate']}, due {document['due']}"
    if document["overdue"]:
        yield f"  OVERDUE: {', '.join(document['overdue_parts'])}; nothing conforms"
    elif document["due_in_days"] < DUE_SOON_DAYS:
        yield f"  due soon: {document['due_first']}, in {document['due_in_days']} days"
    low_c, high_c = document["valid_temperature_c"]
    yield f"  valid from {low_c:g} to {high_c:g} °C; identity {document['identity'][:12]}"
    if document["in_the_future"]:
        yield (
            f"  Note: {document['in_the_future']} lies in the future by this machine's clock; look"
            " at the date or the clock: nothing measures with it"
        )
    if document["invented"]:
        yield "  figures of an example, invented: nothing conforms with them"
    if document["assumed"]:
        kinds = ", ".join(document["assumed"])
        yield f"  assumed, which nobody has confirmed: {kinds}; nothing conforms"
        yield "  (write a [[contribution]] of each such kind, even of zero: that confirms it)"
    yield ""
    for detector in document["detectors"]:
        yield (
            f"detector{_of_axis(detector)}: {detector['kind']}, {_range(detector)},"
            f" averages {detector['averages']}{_over(detector['averaging_s'])}"
        )
        yield from (f"  {spur['text']}: left out of bands" for spur in detector["spurs"])
    for element in document["elements"]:
        yield _element(element)
    yield ""
    yield from _response(document)
    yield ""
    yield from _budget(document)
    yield from _uncertainty(document)
    if document["monte_carlo"]:
        yield ""
        yield from _monte_carlo(document["monte_carlo"])


def _over(averaging_s: float | None) -> str:
    return f" over {averaging_s:g} s" if averaging_s else ""


def _range(detector: Entry) -> str:
    """Of a probe in the unit that its certificate has."""
    if detector["range_v_per_m"]:
        return "{:g} to {:g} V/m".format(*detector["range_v_per_m"])
    return "{:.1f} to {:.1f} dBm".format(*detector["range_dbm"])


def _of_axis(entry: Entry) -> str:
    return f" of axis {entry['axis']}" if entry["axis"] else ""


def _span(entry: Entry) -> str:
    return f"{frequency_text(entry['low_hz'])} to {frequency_text(entry['high_hz'])}"


def _element(element: Entry) -> str:
    what = "" if element["quantity"] == "loss" else element["quantity"].replace("_", " ") + " "
    return (
        f"{element['type']} {element['serial']}{_of_axis(element)}: {_certificate(element)};"
        f" {_span(element)}, {what}{element['smallest_db']:g} to {element['largest_db']:g}"
        f" {element['unit']}"
    )


def _certificate(element: Entry) -> str:
    """What is known of it: number, laboratory, dates, uncertainty."""
    parts = [f"certificate {element['certificate']}"]
    if element["laboratory"]:
        parts.append(f"by {element['laboratory']}")
    parts += [f"{key} {element[key]}" for key in ("date", "due") if element[key]]
    if element["u_db"] is not None:
        least = element["u_db_smallest"]
        span = f"{least:g} to " if least < element["u_db"] else ""
        parts.append(f"U {span}{element['u_db']:g} dB (k = {element['k']:g})")
    return ", ".join(parts)


def _response(document: Entry) -> Iterator[str]:
    probe = any(element["type"] == "probe" for element in document["elements"])
    what = (
        "true less indicated field, E² per watt at the port that stands for it"
        if probe
        else "antenna factor and losses, E² per watt"
    )
    yield f"Response over {_span(document['band'])}: {what}"
    remedy = "" if document["band_given"] else ": give the band of the site file with --band"
    yield f"  (its spread over the band is part of U{remedy})"
    rows = document["response"]
    for axis, row in _merged(rows, document["axes"]):
        yield (
            f"  {axis}{frequency_text(row['frequency_hz']):>12}"
            f" {row['factor_db_per_m']:>8.2f} dB/m {row['e2_per_w']:>12.4g} (V/m)²/W"
        )


def _merged(rows: Sequence[Entry], axes: Sequence[str]) -> Iterator[tuple[str, Entry]]:
    """Rows with the word of their axis before them; where all axes are alike, once without."""
    bare = [[{**row, "axis": ""} for row in rows if row["axis"] == axis] for axis in axes]
    alike = all(own == bare[0] for own in bare)
    for row in rows:
        if not alike or row["axis"] == axes[0]:
            yield "" if alike else f"{row['axis']} ", row


def _budget(document: Entry) -> Iterator[str]:
    shares = ", ".join(
        f"{axis} {100 * share:.3g} %" for axis, share in zip(document["axes"], document["shares"])
    )
    yield f"Contributions to E², its parts: {shares}"
    rows = document["contributions"]
    width = max(len(row["name"]) for row in rows)
    yield (
        f"  {'':<{width}}  {'distribution':<16} {'value':>8} {'dB/unit':>8}"
        f" {'axes':<9} {'u, dB':>6} {'degrees':>8}   of variance"
    )
    for row in rows:
        distribution = row["distribution"].replace("_", "-")
        if row["k"] is not None:
            distribution += f", k = {row['k']:g}"
        axes = f"{row['channels']} {'as one' if row['shared'] else 'apart'}"
        yield (
            f"  {row['name']:<{width}}  {distribution:<16} {_figure(row['value'])}"
            f" {_figure(row['sensitivity'])} {axes:<9} {row['u']:>6.3f}"
            f" {_degrees(row['degrees_of_freedom']):>8} {100 * row['variance_share']:>11.1f} %"
        )


def _figure(value: float | None) -> str:
    return f"{'differs' if value is None else f'{value:.4g}':>8}"


def _degrees(value: float) -> str:
    return f"{value:.1f}" if math.isfinite(value) else "infinite"


def _uncertainty(document: Entry) -> Iterator[str]:
    found = document["uncertainty"]
    yield (
        f"  combined: u = {found['standard_db']:.3f} dB, effective degrees of freedom"
        f" {_degrees(found['effective_degrees_of_freedom'])}"
    )
    yield (
        f"Expanded uncertainty U = {found['expanded_db']:.2f} dB (95 %, k = {found['k']:.3f} from"
        f" the distribution); with k = 2 it would be {found['expanded_k2_db']:.2f} dB"
    )
    for quantity, key in (("E", "e"), ("S", "s")):
        low, high = found[f"factor_{key}_low"], found[f"factor_{key}_high"]
        yield (
            f"  {quantity} lies between {low:.3f} and {high:.3f} times the shown one"
            f" ({100 * (low - 1):+.1f} %, {100 * (high - 1):+.1f} %)"
        )


def _monte_carlo(found: Entry) -> Iterator[str]:
    low, high = found["shortest_db"]
    yield f"By {found['draws']} draws, seed {found['seed']}:"
    yield (
        f"  U = {found['expanded_db']:.3f} dB; shortest interval {low:+.3f} to {high:+.3f} dB;"
        f" mean {found['mean_db']:+.3f} dB, deviation {found['deviation_db']:.3f} dB"
    )
    off = found["difference_percent"]
    beside = "" if off is None else f"; the draws differ by {off:+.2f} %"
    yield f"  analytic at the same shares: U = {found['analytic_db']:.3f} dB{beside}"


def compared(document: Entry) -> Iterator[str]:
    """What two calibration files differ in."""
    a, b = document["a"], document["b"]
    yield f"A: {a['file']}, identity {a['identity'][:12]}"
    yield f"B: {b['file']}, identity {b['identity'][:12]}"
    if document["same"]:
        yield "The same to the byte."
    elif not document["differences"]:
        yield "No entry differs; only layout or remarks do."
    for entry in document["differences"]:
        yield f"  {entry['what']}: {_side(entry['a'])} -> {_side(entry['b'])}"
    yield ""
    yield f"Response over {_span(document['band'])}, B less A (what E² and S become higher by):"
    if document["band_by_as_found"]:
        yield "  (as far as [as_found] of B has a table; another band with --band)"
    for axis, row in _merged(document["response"], document["axes"]):
        yield f"  {axis}{frequency_text(row['frequency_hz']):>12} {row['db']:>+8.2f} dB"
    yield from _drift(document["drift"])
    for axis, row in _merged(document["detectors"], document["axes"]):
        name = f"Detector {axis}".strip()
        if row["largest_db"] is None:
            yield f"{name}: no count within the range of both"
        elif abs(row["largest_db"]) >= 0.005:
            yield (
                f"{name}: the same count reads up to {row['largest_db']:+.2f} dB otherwise"
                f" (at {row['at_dbm']:.1f} dBm)"
            )
    for name in ("a", "b"):
        found = document["uncertainty"][name]
        yield (
            f"{name.upper()}: U = {found['expanded_db']:.2f} dB (95 %, k = {found['k']:.3f}), equal"
            f" shares of the axes; with k = 2 {found['expanded_k2_db']:.2f} dB"
        )


def _drift(drift: Entry | None) -> Iterator[str]:
    """What B found of the calibration before it."""
    if drift is None:
        return
    which = "A" if drift["is_a"] else f"{drift['previous']!r}, which is not A"
    after = "adjusted afterwards" if drift["adjusted"] else "left as found"
    yield (
        f"Drift: as found on {drift['date']} the chain read up to {drift['drift_db']:.2g} dB"
        f" otherwise than {which} says ({after})"
    )
    yield (
        f"  data that rest on {'A' if drift['is_a'] else 'that one'}: a rectangular line of"
        f" {drift['drift_db']:.2g} dB more, u = {drift['u_db']:.3f} dB"
    )


def _side(value: Any) -> str:
    if isinstance(value, list):
        return ", ".join(str(part) for part in value) or "no other row"
    return "not there" if value is None else str(value)
