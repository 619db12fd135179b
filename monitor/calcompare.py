"""What two calibration files differ in, and what that does to the figures."""

from __future__ import annotations

import hashlib
from collections import Counter
from collections.abc import Iterator, Mapping
from dataclasses import fields

import numpy as np

from monitor.calelements import Element
from monitor.callines import Line
from monitor.calparts import CalibrationFile
from monitor.calreview import Document, View, knots_hz, response_db, uncertainty
from monitor.core.budget import Contribution
from monitor.core.caldrift import drift_line
from monitor.core.calibration import CountTable
from monitor.core.errors import CalibrationError
from monitor.core.quantities import dbm_from_w
from monitor.core.uncertainty import equal_shares

CERTIFICATE = ("id", "laboratory", "number", "date", "due", "valid_temperature_c", "invented")


def comparison(a: View, b: View) -> Document:
    """Differences of b from a, both for the same axes and band; dB are of E squared, b less a."""
    response = list(_response(a, b))
    shares = equal_shares(len(a.axes))
    return {
        "a": {"file": a.file.top.where, "identity": a.chain.identity},
        "b": {"file": b.file.top.where, "identity": b.chain.identity},
        "same": a.chain.identity == b.chain.identity,
        "differences": list(_differences(a.file, b.file)),
        "axes": list(a.axes),
        "band": {"low_hz": a.band.low_hz, "high_hz": a.band.high_hz},
        "response": response,
        "largest_response_db": max((row["db"] for row in response), key=_size),
        "drift": drift_between(a.file, b),
        "detectors": [
            {"axis": axis, **_detector(before, after, float(least_w))}
            for axis, before, after, least_w in zip(
                a.axes, a.chain.tables, b.chain.tables, np.maximum(a.chain.least_w, b.chain.least_w)
            )
        ],
        "uncertainty": {"a": uncertainty(a.chain, shares), "b": uncertainty(b.chain, shares)},
    }


def drift_between(a: CalibrationFile, b: View) -> Document | None:
    """What b found of a calibration before, over b's band, and whether that one is a; or None."""
    found = b.file.as_found
    if found is None:
        return None
    try:
        sizes = [found.drift_db(axis, b.band.low_hz, b.band.high_hz) for axis in b.axes]
    except CalibrationError as error:
        raise CalibrationError(f"{error}, or name a band that it covers with --band") from None
    line = drift_line(max(sizes))
    names = (a.certificate.id, hashlib.sha256(a.body).hexdigest())
    return {
        "previous": found.previous,
        "is_a": found.previous in names,
        "date": found.date.isoformat(),
        "adjusted": found.adjusted,
        "drift_db": line.value,
        "distribution": line.distribution,
        "u_db": line.u,
    }


def _size(db: object) -> float:
    return abs(float(str(db)))


def _response(a: View, b: View) -> Iterator[dict[str, object]]:
    """The change at the ends of the band and at every frequency of a table of either."""
    for axis in a.axes:
        f = np.union1d(knots_hz(a, axis), knots_hz(b, axis))
        for hz, db in zip(f, response_db(b, axis, f) - response_db(a, axis, f)):
            yield {"axis": axis, "frequency_hz": float(hz), "db": float(db)}


def _detector(before: CountTable, after: CountTable, least_w: float) -> Document:
    """The largest change of what the same count reads, where both trust it; None where none is."""
    first = max(before.first_count, after.first_count)
    end = min(t.first_count + t.power_w.size for t in (before, after))
    counts = np.arange(first, max(first, end), dtype=np.int32)
    (p_before, f_before), (p_after, f_after) = before.convert(counts), after.convert(counts)
    strong = (p_before >= least_w) & (p_after >= least_w)
    good = (f_before == 0) & (f_after == 0) & strong
    if not good.any():
        return {"largest_db": None, "at_dbm": None}
    db = 10.0 * np.log10(p_after[good] / p_before[good])
    at = int(np.argmax(np.abs(db)))
    return {"largest_db": float(db[at]), "at_dbm": dbm_from_w(float(p_before[good][at]))}


def _differences(a: CalibrationFile, b: CalibrationFile) -> Iterator[Document]:
    """Entry by entry: what, and how each file has it; None: not there."""
    for key in CERTIFICATE:
        yield from _differ(
            f"calibration: {'certificate' if key == 'number' else key}",
            getattr(a.certificate, key),
            getattr(b.certificate, key),
        )
    yield from _tables(_detectors(a), _detectors(b))
    yield from _tables(_elements(a), _elements(b))
    yield from _tables(_lines(a), _lines(b))


def _differ(what: str, a: object, b: object) -> Iterator[Document]:
    if a != b:
        yield {"what": what, "a": _plain(a), "b": _plain(b)}


def _plain(value: object) -> object:
    return list(value) if isinstance(value, tuple) else str(value) if value is not None else None


Table = Mapping[str, object]


def _tables(a: Mapping[str, Table], b: Mapping[str, Table]) -> Iterator[Document]:
    for name in dict.fromkeys([*a, *b]):
        if name not in a or name not in b:
            yield from _differ(name, _there(a, name), _there(b, name))
            continue
        for key in dict.fromkeys([*a[name], *b[name]]):
            yield from _differ(f"{name}: {key}", *_rows_apart(a[name].get(key), b[name].get(key)))


def _rows_apart(a: object, b: object) -> tuple[object, object]:
    """Of two tables only the rows that the other does not have; other values as they are."""
    if not (isinstance(a, tuple) and isinstance(b, tuple)):
        return a, b
    return tuple(row for row in a if row not in b), tuple(row for row in b if row not in a)


def _there(tables: Mapping[str, Table], name: str) -> str | None:
    return "there" if name in tables else None


def _detectors(file: CalibrationFile) -> dict[str, Table]:
    return {
        f"detector {detector.axis}".strip(): {
            key: _rows(value) for key, value in detector.values.items()
        }
        for detector in file.detectors
    }


def _rows(value: object) -> object:
    """Rows and tables as texts, so that only those that differ are shown."""
    return tuple(_words(item) for item in value) if isinstance(value, list) else value


def _words(value: object) -> str:
    """As the file has it, without brackets."""
    if isinstance(value, list):
        return " ".join(_words(item) for item in value)
    if isinstance(value, Mapping):
        return ", ".join(f"{key} {_words(item)}" for key, item in value.items())
    return f"{value:.9g}" if isinstance(value, float) else str(value)


def _elements(file: CalibrationFile) -> dict[str, Table]:
    """By type and axis, counted where there are several: a new serial is a change, not another."""
    seen: Counter[str] = Counter()
    out: dict[str, Table] = {}
    for element in file.elements:
        name = f"element {element.kind} {element.axis}".strip()
        seen[name] += 1
        out[f"{name} ({seen[name]})" if seen[name] > 1 else name] = _element(element)
    return out


def _element(element: Element) -> Table:
    rows = zip(element.curve.frequencies_hz, element.given_db)
    line = element.line.contribution if element.line else None
    return {
        **{key: getattr(element, key) for key in ("serial", "certificate", "laboratory")},
        **{key: getattr(element, key) for key in ("date", "due", "quantity")},
        "table": tuple(f"{hz / 1e6:.9g} MHz {db:.9g} {element.unit}" for hz, db in rows),
        "U": f"{line.value:.9g} dB, k = {line.k:.9g}" if line else None,
        "table of U": _curve(element.line),
        "degrees_of_freedom": line.degrees_of_freedom if line else None,
    }


def _curve(line: Line | None) -> tuple[str, ...]:
    """An uncertainty over frequency, row by row; nothing where it is the same everywhere."""
    if line is None or line.curve is None:
        return ()
    rows = zip(line.curve.frequencies_hz, line.curve.db)
    return tuple(f"{hz / 1e6:.9g} MHz {value:.9g}" for hz, value in rows)


def _lines(file: CalibrationFile) -> dict[str, Table]:
    keys = [field.name for field in fields(Contribution) if field.name != "name"]
    return {
        f"contribution {line.name!r} {line.axis}".strip(): {
            **{key: getattr(line.contribution, key) for key in keys},
            "table": _curve(line),
        }
        for line in file.contributions
    }
