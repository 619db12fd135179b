"""Parts of the chain that were changed without a new calibration, and how that is seen."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from monitor.calelements import Element
from monitor.calparts import CalibrationFile
from monitor.installed import Installed

Certified = tuple[str, str, str, tuple[float, ...], tuple[float, ...]]


def not_as_calibrated(installed: Iterable[Installed], file: CalibrationFile) -> list[str]:
    """One line for each part in place that the calibration file does not have.

    A part without an axis may be any of its type; one with an axis must serve that axis.
    """
    return [
        f"{part.name}: {part.serial} is in place, calibrated was {_or(serials)}"
        for part in installed
        if part.serial not in (serials := _serials(file, part))
    ]


def _serials(file: CalibrationFile, part: Installed) -> list[str]:
    found = [
        element.serial
        for element in file.elements
        if element.kind == part.kind and (not part.axis or element.axis in ("", part.axis))
    ]
    if part.kind == "detector":
        found += [
            detector.serial
            for detector in file.detectors
            if detector.serial and (not part.axis or detector.axis in ("", part.axis))
        ]
    return found


def _or(serials: Sequence[str]) -> str:
    return " or ".join(dict.fromkeys(serials)) or "none of its type"


def swapped(file: CalibrationFile, before: Iterable[CalibrationFile]) -> list[str]:
    """One line for each element whose certificate and table once stood for another serial.

    before: the calibration files that the record has seen, the oldest first. A certificate is of
    the part that it was first entered for: another serial under it is a part that nobody has
    calibrated, for as long as certificate and table stay.
    """
    owners: dict[Certified, set[str]] = {}
    for old in before:
        fresh: dict[Certified, set[str]] = {}
        for element in old.elements:
            if not element.nameless:
                fresh.setdefault(certified(element), set()).add(element.serial)
        owners = fresh | owners
    lines = []
    for element in file.elements:
        owner = owners.get(certified(element))
        if owner and element.serial not in owner:
            axis = f" of axis {element.axis}" if element.axis else ""
            lines.append(
                f"{element.kind}{axis}: {element.serial} stands under certificate "
                f"{element.certificate}, which was entered for {_or(sorted(owner))}"
            )
    return lines


def certified(element: Element) -> Certified:
    """What a certificate says of an element, but for whose it is."""
    return (
        element.kind,
        element.axis,
        element.certificate,
        tuple(element.curve.frequencies_hz.tolist()),
        tuple(element.curve.db.tolist()),
    )


def names_of(file: CalibrationFile) -> frozenset[str]:
    """What the device may call itself: the detectors' serials; empty where one has none."""
    serials = [detector.serial for detector in file.detectors]
    return frozenset(serials) if all(serials) else frozenset()
