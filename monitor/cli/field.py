"""fieldsill field: one detector figure through a calibration file, from counts to V/m."""

from __future__ import annotations

import math
from pathlib import Path

import click

from monitor import calparts, tomlfile
from monitor.calelements import PICKUPS
from monitor.checks import refuse_future_date
from monitor.cli.output import print_json
from monitor.clock import SystemClock
from monitor.core import quantities
from monitor.core.averaging_law import FULLY_AVERAGED, SIGNALS
from monitor.core.errors import ConfigError
from monitor.core.exposure import OUTSIDE_BUDGET
from monitor.core.flags import LOWER_BOUND, UPPER_BOUND, Flag, words
from monitor.core.limits import frequency_text
from monitor.detectorkeys import MOST_V_PER_M
from monitor.onefigure import Figure, Link, through
from monitor.oneport import FORMS, Asked

UNITS = {
    "volts": {"": 1.0, "v": 1.0, "mv": 1e-3},
    "dbm": {"": 1.0, "dbm": 1.0},
    "dbfs": {"": 1.0, "dbfs": 1.0},
    "v_per_m": {"": 1.0, "v/m": 1.0, "mv/m": 1e-3},
    "temperature_c": {"": 1.0, "c": 1.0},
}
LARGEST_COUNT = 2**31 - 1
NO_READING = "no reading"
CAUTION = (
    "One axis at one moment: a component of the field, not an average; no statement about any"
    " limit follows from it."
)
CAUTION_WHOLE = "One moment, not an average; no statement about any limit follows from it."


@click.command("field")
@click.option("--calibration", required=True, help="Calibration file.")
@click.option("--frequency", required=True, help="Of the signal, for example 900MHz.")
@click.option("--counts", type=click.IntRange(-LARGEST_COUNT, LARGEST_COUNT), help="Raw count.")
@click.option("--volts", help="At the detector, for example 1.2V.")
@click.option("--dbm", help="Power at the detector's port, for example -30dBm.")
@click.option("--dbfs", help="Of a receiver, for example -42.5.")
@click.option("--v-per-m", help="Indicated by a probe, for example 3.2V/m.")
@click.option("--axis", type=click.Choice(("x", "y", "z")), help="Where axes differ.")
@click.option("--gain", help="A receiver's gain step, where the file has several.")
@click.option("--temperature-c", help="Of the instrument, degrees Celsius.")
@click.option("--signal", type=click.Choice(SIGNALS), default="undeclared", help="Its class.")
@click.option("--bandwidth", help="Of one signal, for example 5MHz.")
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def command(
    calibration: str, frequency: str, counts: int | None, volts: str | None, dbm: str | None,
    dbfs: str | None, v_per_m: str | None, axis: str | None, gain: str | None,
    temperature_c: str | None, signal: str, bandwidth: str | None, as_json: bool,
) -> None:  # fmt: skip
    """What one figure of a detector is in V/m, step by step, with its uncertainty.

    The uncertainty of a kind (antenna, cable, ...) stands once, beside the first element of it.
    Signal and bandwidth matter where the calibration says that logs are averaged.
    """
    given = {"counts": counts, "volts": volts, "dbm": dbm, "dbfs": dbfs, "v_per_m": v_per_m}
    form, value = _figure(given)
    asked = Asked(
        form,
        value,
        quantities.frequency_hz(frequency),
        axis or "",
        None if temperature_c is None else _number("temperature_c", temperature_c),
        signal,
        0.0 if bandwidth is None else quantities.frequency_hz(bandwidth),
        gain or "",
    )
    now_utc_ns = SystemClock().utc_ns()
    file = calparts.read(Path(calibration))
    refuse_future_date(file.top.where, *calparts.dated(file.body), now_utc_ns)
    found = through(file, asked, now_utc_ns)
    if as_json:
        print_json(_document(asked, found))
        return
    for line in _lines(asked, found):
        click.echo(line)


def _figure(given: dict[str, int | str | None]) -> tuple[str, float]:
    """The one figure that was given, and its form."""
    said = [(form, given[form]) for form in FORMS if given[form] is not None]
    if len(said) != 1:
        what = "several figures" if said else "no figure"
        known = ", ".join(_option(form) for form in FORMS)
        raise ConfigError(f"{what}; give one of {known}")
    form, value = said[0]
    return form, float(value) if isinstance(value, int) else _number(form, str(value))


def _option(form: str) -> str:
    return "--" + form.replace("_", "-")


def _number(option: str, text: str) -> float:
    name = _option(option)
    try:
        value, unit = quantities.split_unit(text)
    except ConfigError:
        raise ConfigError(f"{name}: {text!r} is not a number") from None
    scale = UNITS[option].get(unit.lower())
    if scale is None:
        known = ", ".join(word for word in UNITS[option] if word)
        raise ConfigError(f"{name}: {text!r}: unit {unit!r} is not known; use {known}")
    most = MOST_V_PER_M if option == "v_per_m" else tomlfile.MAX_FIGURE
    if not math.isfinite(value) or abs(value * scale) > most:
        raise ConfigError(f"{name}: {text!r} is beyond {most:g}")
    return value * scale


def _document(asked: Asked, found: Figure) -> dict[str, object]:
    return {
        "frequency_hz": asked.frequency_hz,
        "axis": asked.axis or None,
        "volts": found.volts,
        "gain": asked.gain or None,
        "temperature_correction_db": -found.temperature_db,
        "p_dbm": found.p_dbm,
        "noise_taken_off_dbm": found.noise_dbm,
        "e_v_per_m": found.e_v_per_m,
        "s_w_per_m2": found.s_w_per_m2,
        "standard_uncertainty_db": found.u_db,
        "expanded_uncertainty_db": found.expanded_db,
        "k": found.k,
        "e_low_v_per_m": found.e_low_v_per_m,
        "e_high_v_per_m": found.e_high_v_per_m,
        "flags": words(found.flags),
        "calibration": found.certificate.id,
        "chain": [
            {
                "element": link.element,
                "gain_db": link.gain_db,
                "u_db": link.u_db,
                "certificate": link.certificate,
            }
            for link in found.chain
        ],
    }


def _lines(asked: Asked, found: Figure) -> list[str]:
    """The way from counts to V/m, one line a step."""
    axis = f", axis {asked.axis}" if asked.axis else ""
    others = found.chain[1:]
    head = [f"{found.certificate.id}, at {frequency_text(asked.frequency_hz)}{axis}", ""]
    if asked.form == "counts":
        head.append(_step("raw count", f"{asked.value:.0f}"))
    if asked.form == "v_per_m":
        head.append(_step("indicated", f"{asked.value:.4g} V/m"))
    if asked.form == "dbfs":
        head.append(_step("level", f"{asked.value:.2f} dBFS"))
    if found.volts is not None:
        head.append(_step("voltage at the detector", f"{found.volts:.4g} V"))
    if found.temperature_db:
        taken = f"{-found.temperature_db:+.2f} dB"
        head.append(_step("for its temperature, in what follows", taken))
    head += _on_the_way(found)
    head += [_step(link.element, "", link) for link in others if link.gain_db is None]
    caution = CAUTION if found.flags & Flag.COMPONENT_ONLY else CAUTION_WHOLE
    return [*head, *_result(found), "", *_remarks(asked, found), caution]


def _on_the_way(found: Figure) -> list[str]:
    """From the detector's port to the antenna; a probe as a whole has neither port nor antenna."""
    detector, *others = found.chain
    pickups = [_step(*_loss(link), link) for link in others if link.kind in PICKUPS]
    if any(link.kind == "probe" for link in others):
        e = math.sqrt(quantities.w_from_dbm(found.p_dbm) * quantities.PORT_OHM)
        return [_step("field strength by its linearity", _level(e, "V/m"), detector), *pickups]
    losses = [link for link in others if link.kind not in PICKUPS and link.gain_db is not None]
    taken = []
    if found.noise_dbm is not None:
        taken = [_step("of it noise, taken off for the field", f"{found.noise_dbm:.2f} dBm")]
    at_antenna_dbm = found.p_dbm - sum(link.gain_db or 0.0 for link in losses)
    return [
        _step("power at its port", _level(found.p_dbm, "dBm"), detector),
        *taken,
        *(_step(*_loss(link), link) for link in losses),
        _step("power at the antenna's port", _level(at_antenna_dbm, "dBm")),
        *pickups,
    ]


def _step(name: str, value: str, link: Link | None = None) -> str:
    text = f"  {name:<36} {value:>14}"
    if link is None:
        return text
    u = f"  u {link.u_db:.2f} dB" if link.u_db is not None else ""
    return text + f"{u:<11}" + (f"  certificate {link.certificate}" if link.certificate else "")


def _loss(link: Link) -> tuple[str, str]:
    unit = "dB/m" if link.kind == "antenna" else "dB"
    return f"+ {link.element}", f"{-(link.gain_db or 0.0) + 0.0:.2f} {unit}"


def _level(value: float, unit: str) -> str:
    return NO_READING if math.isnan(value) else f"{value:.2f} {unit}"


def _result(found: Figure) -> list[str]:
    e = found.e_v_per_m
    if math.isnan(e):
        return [_step("field strength", NO_READING)]
    s = f"{found.s_w_per_m2:.4g} W/m2"
    return [
        _step("field strength, rms", f"{e:.4g} V/m"),
        _step("power density of a plane wave", s),
        "",
        f"Expanded uncertainty {found.expanded_db:.2f} dB at 95 % (k = {found.k:.3f}; with k = 2:"
        f" {2.0 * found.u_db:.2f} dB): {_between(found)}",
    ]


def _between(found: Figure) -> str:
    """Where the component lies; a reading at an end of the range has one bound only."""
    low, high = found.e_low_v_per_m, found.e_high_v_per_m
    if found.flags & UPPER_BOUND and math.isinf(high):
        return "no bound at either side"
    if found.flags & UPPER_BOUND:
        return f"below {high:.4g} V/m"
    if math.isinf(high):
        return f"at least {low:.4g} V/m"
    return f"{low:.4g} to {high:.4g} V/m"


def _remarks(asked: Asked, found: Figure) -> list[str]:
    """What the figures do not say by themselves; a range's end, the budget's, the axis's."""
    bounds = int(LOWER_BOUND | UPPER_BOUND)
    ends = found.flags & bounds & ~int(Flag.COMPONENT_ONLY | Flag.LOG_AVERAGED)
    rest = found.flags & ~int(OUTSIDE_BUDGET) & ~bounds
    said = [f"Note: {text}" for text in words(rest)]
    if ends:
        shown = "" if math.isnan(found.e_v_per_m) else "; that end of it is shown"
        said.append(f"Note: {', '.join(words(ends))}{shown}")
    if found.flags & Flag.LOG_AVERAGED:
        said.append("Note: log averaged before linearising: bursts read low, a lower bound")
    if found.flags & Flag.LOG_AVERAGED and asked.signal == "noise":
        said.append(
            "Note: noise is corrected only where --bandwidth times the averaging_s of the"
            f" calibration file is {FULLY_AVERAGED:g} or more"
        )
    outside = words(found.flags & int(OUTSIDE_BUDGET))
    if outside:
        said.append(f"Note: the stated uncertainty does not cover this: {', '.join(outside)}")
    if not found.flags & Flag.COMPONENT_ONLY:
        return said
    whole = "more than this" if found.flags & UPPER_BOUND else "this much or more"
    may = "may be" if found.flags & UPPER_BOUND else "is"
    return [*said, f"Note: fewer than three axes: the whole field {may} {whole}"]
