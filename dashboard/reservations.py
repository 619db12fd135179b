"""What a reservation on a figure means and what to do about it; a line's counters in words."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

from monitor.core.flags import WORDS, Flag

_MEANS = {
    Flag.NO_SIGNAL_WIRE: "those readings count as gaps; "
    "look for an open or shorted wire between detector and converter.",
    Flag.BELOW_RANGE: "the field is too weak for this detector, so the figure is an upper bound; "
    "nothing needs to be done unless weaker fields matter.",
    Flag.ABOVE_RANGE: "the field is too strong for this detector, so the figure is a lower bound; "
    "have it measured with an instrument of a higher range.",
    Flag.CLIPPED: "the converter was at its end, so the figure is a lower bound; "
    "reduce its gain or put an attenuator before it, and calibrate again.",
    Flag.OUT_OF_TEMPERATURE: "the stated uncertainty does not hold at this temperature; "
    "shade, cool or warm the instrument.",
    Flag.CALIBRATION_OVERDUE: "the stated uncertainty may no longer hold; "
    "have the chain calibrated and enter the new certificate.",
    Flag.CLOCK_UNSYNCHRONISED: "times may be wrong; connect the box to a time server.",
    Flag.SIMULATED: "the data are invented; nothing was measured.",
    Flag.LOG_AVERAGED: "a varying field reads too low this way, so the figure is a lower bound; "
    "have the detector's output read without averaging.",
    Flag.COMPONENT_ONLY: "a part of the field is not seen, so the figure is a lower bound; "
    "use three axes, or turn the antenna through three directions.",
    Flag.OUT_OF_BAND: "the calibration says nothing about these frequencies; "
    "use a chain that is calibrated for them.",
    Flag.SUPPLY_OUT_OF_RANGE: "readings may be wrong; check the power supply and its cable.",
    Flag.GAP: "a part of the time is not measured; see the gaps in the history.",
    Flag.TEMPERATURE_UNKNOWN: "whether the calibration holds at it cannot be told; "
    "use a board that tells its temperature, or keep the box within the calibrated range.",
    Flag.INVENTED_CALIBRATION: "the figures are an example's and prove nothing; "
    "have the chain calibrated and enter its certificate.",
    Flag.CALIBRATION_DUE_SOON: "the figures hold until then; "
    "arrange the next calibration now, so that the record has no part without one.",
    Flag.ELEMENT_CHANGED: "the stated uncertainty does not cover the new part; "
    "enter its certificate, or put the calibrated part back.",
    Flag.ASSUMED_TERMS: "defaults stand in for them, and nothing conforms on a default; "
    "enter a line of your own for each in the calibration file.",
    Flag.CORRECTED_LOG: "2.51 dB were added, which is right for continuous noise-like signals "
    "only; a carrier then reads high and bursts still read low.",
}
_BY_WORDS = {WORDS[flag]: means for flag, means in _MEANS.items()}

_COUNTERS = {
    "frames": "groups of readings received",
    "samples": "readings received",
    "readings": "readings received",
    "lines": "lines received",
    "rows": "rows read",
    "banners": "times the board named itself",
    "bad_checksum": "lines damaged on the way",
    "malformed": "lines that could not be understood",
    "partial": "lines cut short",
    "garbage": "pieces of noise on the line",
    "too_long": "lines too long to be real",
    "lost": "groups of readings lost on the way",
    "repeated": "groups of readings that came twice",
    "restarts": "restarts of the board",
    "unannounced": "groups of readings before the board named itself",
    "refused": "groups of readings refused",
    "contradicting": "messages that contradict what the board said before",
    "unplaced": "readings without a time",
    "hangs": "times the line was open but silent",
    "open_failures": "failed attempts to open the line",
    "reopened": "times the line was opened again",
    "vanished": "times the device vanished",
    "missing": "readings marked as missing",
    "overload": "readings marked as overload",
    "comments": "comment lines",
    "out_of_order": "readings out of order in time",
    "samples_left_out": "samples left out",
    "clipped_components": "samples at the converter's end",
}


def days_left(snapshot: Mapping[str, Any]) -> int | None:
    """Whole days until the calibration is due; None where that is not known."""
    days = (snapshot.get("calibration") or {}).get("days_left")
    return days if isinstance(days, int) else None


def sentence(flag: str, days: int | None = None) -> str:
    """A reservation in one sentence: its words, what it means, what to do.

    days: until the calibration is due, where that is known.
    """
    means = _BY_WORDS.get(flag)
    if flag == WORDS[Flag.CALIBRATION_DUE_SOON] and days is not None and days >= 0:
        flag = f"calibration due in {days} day{'' if days == 1 else 's'}"
    return f"{flag[:1].upper()}{flag[1:]}: {means}" if means else flag


@dataclass(frozen=True, slots=True)
class Counters:
    """The device's counters in words: those that counted something, and the names of the rest."""

    some: list[tuple[str, int]]
    none: list[str]


def counters(snapshot: Mapping[str, Any]) -> Counters:
    """Every counter of the device, bad frames among them."""
    found = (snapshot.get("device") or {}).get("counters") or {}
    named = [(_named(str(key)), int(count)) for key, count in found.items()]
    return Counters([c for c in named if c[1]], [name for name, count in named if not count])


def _named(key: str) -> str:
    return _COUNTERS.get(key, key.replace("_", " "))


def sentences(flags: Iterable[str], days: int | None = None) -> list[str]:
    """The sentences of reservations; simulated data aside, for every page says that itself."""
    return [sentence(flag, days) for flag in flags if flag != WORDS[Flag.SIMULATED]]
