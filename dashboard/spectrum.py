"""What the page of the spectrum draws and says. Pure geometry and words, no markup."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from dashboard import words
from dashboard.chart import Frame
from dashboard.models import OWN_POPULATION, Station

Document = Mapping[str, Any]

WIDE = Frame(980, 400, 60, 14, 30, 76)
NARROW = Frame(400, 400, 46, 14, 30, 76)
LETTER = 8.5
"""Width that a letter of a label takes, at most."""


@dataclass(frozen=True, slots=True)
class Bracket:
    """A named band below the axis: from x0 to x1, its words' place and row."""

    x0: float
    x1: float
    text: str
    text_x: float
    row: int


@dataclass(frozen=True, slots=True)
class Drawing:
    """One place of the tuner. mean, most: paths of steps; y grows downward."""

    frame: Frame
    mean: str
    most: str
    x_ticks: list[tuple[float, str]]
    y_ticks: list[tuple[float, str]]
    brackets: list[Bracket]


@dataclass(frozen=True, slots=True)
class BandLine:
    """One named band in words; bar: its share of the limit in the drawing, 0 to 1.

    part: its part of what all named bands have together, '' where nothing is to be compared.
    """

    number: int
    name: str
    edges: str
    mean: str
    most: str
    field: str
    share: str
    part: str
    bar: float
    note: str


def page(found: Document | None, station: Station) -> dict[str, Any]:
    """What the template needs; found: the daemon's document, None where there is no spectrum."""
    document: Document = found or {"places": [], "bands": [], "scopes": []}
    site = document.get("site") or {}
    controlled = (site.get("occupancy") or station.occupancy) == "controlled"
    scope = governing(document, controlled)
    chosen = None if scope is None else document["scopes"][scope]
    return {
        "there": found is not None,
        "simulated": bool(document.get("simulated")),
        "name": site.get("name") or station.name,
        "place": site.get("place") or station.place,
        "drawn": words.moment(words.parse_utc(document.get("utc")), seconds=True),
        "connected": document.get("connected", False),
        "seconds": document.get("seconds"),
        "bands": band_lines(document, scope),
        "scope_title": chosen
        and words.scope_title(
            chosen["set"], chosen["population"], chosen["scope"], chosen["averaging_s"]
        ),
        "places": [
            {
                "title": f"{one['low_hz'] / 1e6:.6g} to {one['high_hz'] / 1e6:.6g} MHz",
                "drawings": [
                    (css, draw(one, document["bands"], frame))
                    for css, frame in (("wide", WIDE), ("narrow", NARROW))
                ],
                "summary": summary(one, swept=len(document["places"]) > 1),
                "piece": f"{words.figure(1e3 * one['piece_s'], 1)} ms",
                "outside": outside_words(one),
            }
            for one in document["places"]
        ],
    }


def draw(place: Document, bands: Sequence[Document], frame: Frame) -> Drawing:
    """The drawing of one place of the tuner."""
    low_db, high_db = _scale([*place["mean_dbfs"], *place["max_dbfs"]])
    left, right = float(frame.left), float(frame.x1)

    def x_of(hz: float) -> float:
        part = (hz - place["low_hz"]) / (place["high_hz"] - place["low_hz"])
        return float(round(left + (right - left) * min(max(part, 0.0), 1.0), 1))

    def y_of(level: float) -> float:
        part = (level - low_db) / (high_db - low_db)
        return float(round(frame.y1 - (frame.y1 - frame.top) * min(max(part, 0.0), 1.0), 1))

    step_hz = (place["high_hz"] - place["low_hz"]) / len(place["mean_dbfs"])
    edges = [x_of(place["low_hz"] + i * step_hz) for i in range(len(place["mean_dbfs"]) + 1)]
    return Drawing(
        frame,
        _steps(edges, [None if v is None else y_of(v) for v in place["mean_dbfs"]]),
        _steps(edges, [None if v is None else y_of(v) for v in place["max_dbfs"]]),
        [(x_of(hz), text) for hz, text in _megahertz(place, frame)],
        [(y_of(db), f"{db:.0f}".replace("-", "−")) for db in _tens(low_db, high_db)],
        _brackets(place, bands, x_of),
    )


def _scale(levels: Sequence[float | None]) -> tuple[float, float]:
    """Whole tens round what is there, forty at least, never above full scale's next ten."""
    known = [level for level in levels if level is not None]
    if not known:
        return -80.0, 0.0
    high = 10.0 * math.ceil((max(known) + 2.0) / 10.0)
    return min(10.0 * math.floor(min(known) / 10.0), high - 40.0), high


def _tens(low_db: float, high_db: float) -> list[float]:
    step = 10.0 if high_db - low_db <= 80.0 else 20.0
    first = step * math.ceil(low_db / step)
    return [first + i * step for i in range(int((high_db - first) / step) + 1)]


def _megahertz(place: Document, frame: Frame) -> list[tuple[float, str]]:
    """Round frequencies, a label's width apart."""
    span = place["high_hz"] - place["low_hz"]
    raw = span / max(2, (frame.x1 - frame.left) // 90)
    unit = 10.0 ** math.floor(math.log10(raw))
    step = next(m * unit for m in (1, 2, 5, 10) if m * unit >= raw)
    first = math.ceil(place["low_hz"] / step)
    found = []
    while first * step <= place["high_hz"]:
        found.append((first * step, f"{first * step / 1e6:.10g}"))
        first += 1
    return found


def _steps(edges: Sequence[float], ys: Sequence[float | None]) -> str:
    """A line of steps; the pen is up where there is no level."""
    parts, down = [], False
    for x0, x1, y in zip(edges, edges[1:], ys):
        if y is None:
            down = False
            continue
        parts.append(f"{f'V{y}' if down else f'M{x0} {y}'}H{x1}")
        down = True
    return "".join(parts)


def _brackets(place: Document, bands: Sequence[Document], x_of: Any) -> list[Bracket]:
    """The bands that lie here; names where they fit, else their numbers, on two rows in turn."""
    found: list[Bracket] = []
    inside = [
        (number, band)
        for number, band in enumerate(bands, 1)
        if band["low_hz"] < place["high_hz"] and band["high_hz"] > place["low_hz"]
    ]
    for row, (number, band) in enumerate(sorted(inside, key=lambda pair: pair[1]["low_hz"])):
        x0, x1 = x_of(band["low_hz"]), x_of(band["high_hz"])
        name = f"{number} {band['name']}"
        text = name if LETTER * len(name) <= x1 - x0 else str(number)
        found.append(Bracket(x0, x1, text, round((x0 + x1) / 2, 1), row % 2))
    return found


def governing(document: Document, controlled: bool) -> int | None:
    """Which scope of the place's own population has the largest share in all bands together."""
    own = OWN_POPULATION["controlled" if controlled else "public"]
    sums = {
        index: sum(_share(band, index) or 0.0 for band in document["bands"])
        for index, scope in enumerate(document["scopes"])
        if scope["population"] == own
    }
    return max(sums, key=lambda index: sums[index]) if sums else None


def band_lines(document: Document, scope: int | None) -> list[BandLine]:
    """Every named band, weighed against one scope."""
    shares = [_share(band, scope) for band in document["bands"]]
    total = sum(share or 0.0 for share in shares)
    return [
        _line(number, band, share, total if len(shares) > 1 else 0.0)
        for number, (band, share) in enumerate(zip(document["bands"], shares), 1)
    ]


def _share(band: Document, scope: int | None) -> float | None:
    shares = band.get("shares")
    if shares is None or scope is None:
        return None
    share = shares[scope]
    return None if share is None else float(share)


def _line(number: int, band: Document, share: float | None, total: float) -> BandLine:
    notes = list(band.get("flags") or ())
    edges = f"{band['low_hz'] / 1e6:.10g} to {band['high_hz'] / 1e6:.10g} MHz"
    return BandLine(
        number,
        band["name"],
        edges,
        level(band.get("mean_dbfs")),
        level(band.get("max_dbfs")),
        words.figure(band.get("e_mean")),
        words.of_limit(share),
        f"{100.0 * share / total:.0f} % of all named bands" if share and total else "",
        min(share or 0.0, 1.0),
        "; ".join(notes),
    )


def level(value: float | None) -> str:
    """A level in dB with a true minus."""
    return "no figure" if value is None else f"{value:.1f}".replace("-", "−")


def outside_words(place: Document) -> str:
    """What lies outside the named bands at a place of the tuner."""
    outside = place.get("outside")
    if outside is None:
        return "Nothing of this part lies outside the named bands."
    return (
        f"Outside the named bands: {level(outside['dbfs'])} dB in all, the receiver's own noise "
        f"among it; strongest near {outside['strongest_hz'] / 1e6:.6g} MHz, "
        f"{level(outside['strongest_dbfs'])} dB."
    )


def summary(place: Document, swept: bool) -> str:
    """Of when a drawing is, and how much of the time it shows; swept: there are other places."""
    part = place["looked_s"] / place["seconds"] if place["seconds"] else 0.0
    looked = "Less than 1 %" if 0.0 < part < 0.01 else words.share(part)
    rest = (
        "; the figures below hold what was measured while the receiver was tuned here, no more."
        if swept
        else ", but it is in the figures below."
    )
    age = place["age_s"]
    old = f", {words.duration(age)} ago" if age >= 10.0 else ""
    return (
        f"Over {place['seconds']:.1f} s{old}. {looked} of that time was looked at: "
        f"what came in between is not in the drawing{rest}"
    )
