"""A calibration file as a document: what it holds, its response over a band, its budget.

Keys carry their units. Degrees of freedom without end are math.inf, null in JSON.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass

import numpy as np

from monitor.calelements import Element
from monitor.calfile import chain
from monitor.calparts import CalibrationFile, ahead, axes_of, dated, elements_of
from monitor.calterms import assumed_kinds
from monitor.config import Band, Channel
from monitor.core.budget import combined, factors, table
from monitor.core.calibration import Chain
from monitor.core.distributions import Real
from monitor.core.errors import CalibrationError, ConfigError
from monitor.core.flags import words
from monitor.core.limits import frequency_text
from monitor.core.montecarlo import errors_db, spread
from monitor.core.quantities import PORT_OHM
from monitor.core.uncertainty import equal_shares, expanded_db
from monitor.detectorfile import Detector
from monitor.detectorkinds import ProbeSource, ScaleSource
from monitor.marking import DAY_NS
from monitor.spurs import text_of

Document = dict[str, object]


@dataclass(frozen=True, slots=True, eq=False)
class View:
    """A file, the axes and the band that it is looked at for, and the chain that this gives.

    gain: the receiver's gain step, '' where there is one only."""

    file: CalibrationFile
    axes: str
    band: Band
    chain: Chain
    gain: str = ""


def view(
    file: CalibrationFile,
    axes: str | None,
    band_hz: tuple[float, float] | None,
    gain: str = "",
) -> View:
    """The chain for the axes (default: all that it serves) and the band (default: all of it).

    gain: a receiver's gain step; '' where there is one only.

    CalibrationError where the file has no chain for them.
    """
    axes = axes or axes_of(file)
    low_hz, high_hz = band_hz or span_hz(file, axes)
    text = f"{frequency_text(low_hz)} to {frequency_text(high_hz)}"
    band = Band(text, low_hz, high_hz)
    channels = [Channel(axis, axis, band.name, gain) for axis in axes]
    return View(file, axes, band, chain(file, channels, {band.name: band}), gain)


def span_hz(file: CalibrationFile, axes: str) -> tuple[float, float]:
    """The frequencies that every table of every one of the axes covers.

    CalibrationError where there are none.
    """
    tables = [element.curve.frequencies_hz for a in axes for element in elements_of(file, a)]
    spans = [(float(f[0]), float(f[-1])) for f in tables]
    spans += [d.source.span_hz for d in file.detectors if d.axis in ("", *axes)]
    low, high = max(s[0] for s in spans), min(s[1] for s in spans)
    if not low < high < math.inf:
        raise CalibrationError(
            f"{file.top.where}: element: no band lies in all tables; calibrate further"
        )
    return low, high


def knots_hz(shown: View, axis: str) -> Real:
    """Ends of the band and the frequencies of the axis' tables inside it, rising (m,)."""
    low, high = shown.band.low_hz, shown.band.high_hz
    knots = [element.curve.frequencies_hz for element in elements_of(shown.file, axis)]
    inside = [f[(f > low) & (f < high)] for f in knots]
    return np.unique(np.concatenate([[low, high], *inside]))


def response_db(shown: View, axis: str, frequencies_hz: Real) -> Real:
    """Antenna factor and losses (m,), dB/m, within the band."""
    at = shown.axes.index(axis)
    grid, k = shown.chain.frequencies_hz[at], shown.chain.k[at]
    return np.interp(np.log(frequencies_hz), np.log(grid), 10.0 * np.log10(k / PORT_OHM))


def document(shown: View, shares: Real, now_utc_ns: int) -> Document:
    """All of it. shares: (c,), each axis' part of E squared."""
    file, certificate = shown.file, shown.file.certificate
    dues = file.dues(shown.axes)
    overdue = [due for due in dues if now_utc_ns >= due.utc_ns]
    dated_by, last_day = dated(file.body)
    return {
        "file": file.top.where,
        "identity": shown.chain.identity,
        "id": certificate.id,
        "laboratory": certificate.laboratory,
        "certificate": certificate.number,
        "date": certificate.date.isoformat(),
        "in_the_future": dated_by if ahead(last_day, now_utc_ns) else None,
        "due": certificate.due.isoformat(),
        "due_in_days": (dues[0].utc_ns - now_utc_ns) // DAY_NS,
        "due_first": dues[0].what,
        "overdue": bool(overdue),
        "overdue_parts": [due.what for due in overdue],
        "invented": file.invented,
        "assumed": assumed_kinds(shown.chain.contributions),
        "valid_temperature_c": list(certificate.valid_temperature_c),
        "flags": words(shown.chain.flags),
        "axes": list(shown.axes),
        "detectors": _detectors(shown),
        "elements": _elements(file),
        "band": {"low_hz": shown.band.low_hz, "high_hz": shown.band.high_hz},
        "response": _response(shown),
        "shares": shares.tolist(),
        "contributions": [asdict(row) for row in table(shown.chain.contributions, shares)],
        "uncertainty": uncertainty(shown.chain, shares),
    }


def _spurs(detector: Detector) -> list[Document]:
    """Of a receiver: each line that it makes itself, which is left out of bands."""
    source = detector.source
    if not isinstance(source, ScaleSource):
        return []
    return [asdict(spur) | {"text": text_of(spur)} for spur in source.spurs]


def _detectors(shown: View) -> list[Document]:
    out: list[Document] = []
    for detector in shown.file.detectors:
        out.append(
            {
                "axis": detector.axis or None,
                "kind": detector.kind,
                "averages": detector.averages,
                "averaging_s": detector.averaging_s or None,
                "range_dbm": _range_dbm(shown, detector),
                "range_v_per_m": _range_v_per_m(detector),
                "resolution": detector.resolution,
                "spurs": _spurs(detector),
            }
        )
    return out


def _range_dbm(shown: View, detector: Detector) -> list[float]:
    """Of the gain step that is looked at; of all of them for an axis that is not."""
    source = detector.source
    if isinstance(source, ScaleSource) and detector.axis in ("", *shown.axes):
        return list(source.step(detector.where, shown.gain).range_dbm)
    return list(source.range_dbm)


def _range_v_per_m(detector: Detector) -> list[float] | None:
    """Of a probe calibrated as a whole."""
    source = detector.source
    return list(source.law.range_v_per_m) if isinstance(source, ProbeSource) else None


def _elements(file: CalibrationFile) -> list[Document]:
    return [
        {
            "type": element.kind,
            "axis": element.axis or None,
            "serial": element.serial,
            "certificate": element.certificate,
            "laboratory": element.laboratory or None,
            "date": element.date.isoformat() if element.date else None,
            "due": element.due.isoformat() if element.due else None,
            **_certified(element),
            "quantity": element.quantity,
            "unit": element.unit,
            "low_hz": float(element.curve.frequencies_hz[0]),
            "high_hz": float(element.curve.frequencies_hz[-1]),
            "smallest_db": float(element.given_db.min()),
            "largest_db": float(element.given_db.max()),
        }
        for element in file.elements
    ]


def _certified(element: Element) -> Document:
    """U of the certificate, smallest and largest of its table, its factor; None: not given."""
    if element.line is None:
        return {"u_db": None, "u_db_smallest": None, "k": None}
    line, curve = element.line.contribution, element.line.curve
    smallest = line.value if curve is None else float(curve.db.min())
    return {"u_db": line.value, "u_db_smallest": smallest, "k": line.k}


def _response(shown: View) -> list[Document]:
    out: list[Document] = []
    for axis in shown.axes:
        f = knots_hz(shown, axis)
        for hz, db in zip(f, response_db(shown, axis, f)):
            e2_per_w = PORT_OHM * 10.0 ** (float(db) / 10.0)
            row = {"axis": axis, "frequency_hz": float(hz), "factor_db_per_m": float(db)}
            out.append({**row, "e2_per_w": e2_per_w})
    return out


def uncertainty(held: Chain, shares: Real) -> Document:
    """Standard and expanded uncertainty of E squared, dB, and the bounds that they mean."""
    expanded, k = expanded_db(held.contributions, shares[None, :])
    here = combined(held.contributions, shares)
    return {
        "standard_db": here.u,
        "effective_degrees_of_freedom": here.degrees_of_freedom,
        "k": k,
        "expanded_db": float(expanded[0]),
        "k_at_these_shares": here.k,
        "expanded_at_these_shares_db": here.k * here.u,
        "expanded_k2_db": 2.0 * here.u,
        **{f"factor_{key}": value for key, value in asdict(factors(float(expanded[0]))).items()},
    }


def monte_carlo(held: Chain, shares: Real, draws: int, seed: int) -> Document:
    """The same figure by drawing, and by how much it differs from the analytic one."""
    found = spread(errors_db(held.contributions, shares, draws, seed))
    here = combined(held.contributions, shares)
    analytic_db = here.k * here.u
    return {
        "draws": draws,
        "seed": seed,
        "mean_db": found.mean_db,
        "deviation_db": found.deviation_db,
        "expanded_db": found.expanded_db,
        "shortest_db": list(found.shortest_db),
        "analytic_db": analytic_db,
        "difference_percent": 100.0 * (found.expanded_db / analytic_db - 1.0)
        if analytic_db
        else None,
    }


def shares_of(text: str | None, axes: str) -> Real:
    """Each axis' part of E squared (c,), from '0.5,0.3,0.2'; equal where nothing is given."""
    if text is None:
        return equal_shares(len(axes))
    try:
        given = np.array([float(part) for part in text.split(",")])
    except ValueError:
        raise ConfigError(f"shares {text!r}: write numbers, for example 0.5,0.3,0.2") from None
    if given.size != len(axes) or not np.isfinite(given).all() or (given < 0).any():
        raise ConfigError(f"shares {text!r}: one number of zero or more for each of {axes}")
    if not given.any():
        raise ConfigError(f"shares {text!r}: all are zero")
    parts = given / given.max()  # a sum of large ones may be beyond any number
    return np.asarray(parts / parts.sum())


def common_band(
    files: Sequence[CalibrationFile], axes: str, *, drift: bool = True
) -> tuple[float, float]:
    """The frequencies that all the files cover; with drift, those of the tables that the last one
    has of what it found, too. CalibrationError where there are none."""
    spans = [span_hz(file, axes) for file in files]
    found = files[-1].as_found
    spans += found.spans_hz(axes) if drift and found is not None else []
    low, high = max(s[0] for s in spans), min(s[1] for s in spans)
    if not low < high:
        raise CalibrationError(
            "the calibration files have no band in common, [as_found] of the later one included;"
            " name one with --band"
        )
    return low, high
