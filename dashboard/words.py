"""Plain words for figures, verdicts, alarms and times. Pure: no clock, no state."""

from __future__ import annotations

import math
from collections.abc import Sequence
from datetime import UTC, datetime
from decimal import ROUND_CEILING, ROUND_FLOOR, Decimal

from monitor.core.alarms import INSTRUMENT_TEXTS

CAUTIONS = (
    "This is an area monitor: it measures at its own antenna, at one place. Field strength changes "
    "within an arm's length; where a person stands it may be higher.",
    "It is not an interlock, not a personal monitor and not proof that a transmitter is off. "
    "A transmitter may start at any moment.",
    "Local codes, the site's own procedures and licensed or otherwise authorised practice decide "
    "what may be done here. This page decides nothing.",
)

NOT_JUDGED = (
    "Not judged here: exposures shorter than the averaging time, pulses and peaks, nerve "
    "stimulation below 10 MHz, currents in limbs and on contact, the magnetic field, and averaging "
    "times that change with frequency above 10 GHz. Limits for these may apply as well; they need "
    "other measurements."
)
"""What published limits ask and this monitor does not judge."""

POPULATIONS = {"general_public": "general public", "occupational": "occupational"}
SCOPES = {
    "whole_body": "whole body",
    "local": "local",
    "brief": "brief exposure",
    "instantaneous": "instantaneous",
}
SETS = {
    "icnirp-2020": "ICNIRP 2020",
    "icnirp-1998": "ICNIRP 1998",
    "eu-1999-519": "EU 1999/519/EC",
    "eu-2013-35": "EU 2013/35/EU",
    "fcc-1.1310": "47 CFR 1.1310",
    "ieee-c95.1-2019": "IEEE C95.1-2019",
    "safety-code-6-2015": "Safety Code 6 (2015)",
}
"""Short names of limit sets; a set not named here goes by its id."""

NOTHING = "says nothing about the field"


def scope_title(set_id: str, population: str, scope: str, averaging_s: float) -> str:
    """'ICNIRP 2020, general public, whole body, 30 min'."""
    return ", ".join(
        [
            SETS.get(set_id, set_id),
            POPULATIONS.get(population, population),
            SCOPES.get(scope, scope.replace("_", " ")),
            duration(averaging_s),
        ]
    )


def figure(value: float | None, digits: int = 2) -> str:
    """A number to so many significant digits, without exponent; 'no figure' where there is none."""
    if value is None or not math.isfinite(value):
        return "no figure"
    if value == 0:
        return "0"
    rounded = float(f"{value:.{digits - 1}e}")
    decimals = digits - 1 - math.floor(math.log10(abs(rounded)))
    return f"{rounded:.{max(0, decimals)}f}"


def ratio_figure(ratio: float | None) -> str:
    """An exposure ratio; near the limit with as many digits as keep it on its side of 1."""
    if ratio is None or not math.isfinite(ratio):
        return "no figure"
    if 0 < ratio < 1e-5:
        return "less than 0.00001"
    digits = 3 if 0.9 <= ratio < 1.1 else 2
    text = figure(ratio, digits)
    while ratio != 1 and float(text) == 1 and digits < 9:
        digits += 1
        text = figure(ratio, digits)
    return text


def rounded_down(ratio: float) -> str:
    """A ratio of 0 or more for 'at least' and 'left': never more than it is."""
    return _towards(ratio, ROUND_FLOOR)


def rounded_up(ratio: float) -> str:
    """A ratio of 0 or more for 'below' and upper ends: never less than it is."""
    return _towards(ratio, ROUND_CEILING)


def _towards(ratio: float, direction: str) -> str:
    exact = Decimal(repr(float(ratio)))
    places = 5
    if ratio >= 1e-5:
        digits = 3 if 0.9 <= ratio < 1.1 else 2
        places = digits - 1 - exact.adjusted()
    rounded = exact.quantize(Decimal(1).scaleb(-places), rounding=direction)
    return f"{rounded:.{max(0, places)}f}" if rounded else "0"


def percent(ratio: float) -> str:
    """A ratio in per cent, on the same side of 100 as the ratio is of 1."""
    if 0 < ratio < 1e-5:
        return "less than 0.001 %"
    text = ratio_figure(ratio)
    places = max(0, len(text.partition(".")[2]) - 2)
    return f"{float(text) * 100:.{places}f} %"


def of_limit(ratio: float | None) -> str:
    """'0.31 of the limit (31 %)'."""
    if ratio is None or not math.isfinite(ratio):
        return "no figure"
    return f"{ratio_figure(ratio)} of the limit ({percent(ratio)})"


def share(value: float | None) -> str:
    """A share in per cent, rounded down, so that 100 % means all of it."""
    if value is None or not math.isfinite(value):
        return "unknown"
    return f"{math.floor(value * 100 + 1e-9)} %"


def duration(seconds: float) -> str:
    """'3 s', '2 min', '3 h 12 min', '4 days'; rounded down, so an age is never overstated."""
    whole = max(0, int(seconds))
    if whole < 120:
        return f"{whole} s"
    if whole < 7200:
        return f"{whole // 60} min"
    if whole < 172_800:
        return f"{whole // 3600} h {whole % 3600 // 60} min"
    return f"{whole // 86_400} days"


AVERAGES = {360: "six-minute average", 1800: "thirty-minute average"}


def average(averaging_s: int) -> str:
    """The name of an average, for example 'six-minute average'."""
    return AVERAGES.get(averaging_s, f"average over {duration(averaging_s)}")


def verdict(name: str, reasons: Sequence[str]) -> str:
    """'conforms', 'exceeds' or 'cannot be decided: reasons'."""
    if name in ("conforms", "exceeds"):
        return name
    return "cannot be decided" + (": " + "; ".join(reasons) if reasons else "")


def alarm_state(state: str, *, is_level: bool, muted_until: str = "") -> str:
    """What stands about an alarm, for example 'over, not yet confirmed'."""
    now, was = ("over", "was over, back below") if is_level else ("present", "was present, gone")
    return {
        "unacknowledged": f"{now}, not yet confirmed",
        "acknowledged": f"{now}, confirmed",
        "returned_unacknowledged": f"{was} now, not yet confirmed",
        "shelved": f"muted until {muted_until}" if muted_until else "muted",
        "normal": "below the level" if is_level else "not present",
    }.get(state, state.replace("_", " "))


def alarm_text(key: str) -> str:
    """An alarm's key in words: 'name: scope' for one of an alert level, else as it stands."""
    parts = scope_of(key)
    if not parts:
        return INSTRUMENT_TEXTS.get(key, key)
    name = key.partition(" | ")[0]
    return f"{name}: {scope_title(parts[0], parts[1], parts[2], int(parts[3]))}"


def scope_of(key: str) -> list[str]:
    """Set, population, scope and seconds of an alarm's key; none where it is about no limit."""
    _, bar, scope = key.partition(" | ")
    parts = scope.removesuffix(" s").split(" ")
    return parts if bar and len(parts) == 4 and parts[3].isdecimal() else []


def parse_utc(text: str | None) -> datetime | None:
    """An RFC 3339 time as an aware UTC datetime; None where there is none or it is not one."""
    if not text:
        return None
    try:
        moment = datetime.fromisoformat(text)
    except ValueError:
        return None
    return moment.replace(tzinfo=UTC) if moment.tzinfo is None else moment.astimezone(UTC)


def moment(when: datetime | None, today: datetime | None = None, *, seconds: bool = False) -> str:
    """'07:12 UTC' on the day of today, else with the date; 'an unknown time' for None."""
    if when is None:
        return "an unknown time"
    clock = when.strftime("%H:%M:%S" if seconds else "%H:%M")
    if today is not None and when.date() == today.date():
        return f"{clock} UTC"
    return f"{when.date().isoformat()} {clock} UTC"


def dated(when: datetime) -> str:
    """'Saturday 1 March 2025, 12:00:00 UTC'."""
    return f"{when:%A} {when.day} {when:%B %Y, %H:%M:%S} UTC"


def utc_of(utc_ns: int) -> datetime:
    """The aware UTC datetime of UTC nanoseconds, to the microsecond."""
    seconds, rest = divmod(int(utc_ns), 1_000_000_000)
    return datetime.fromtimestamp(seconds, UTC).replace(microsecond=rest // 1000)


def rfc3339(utc_ns: int) -> str:
    """RFC 3339 text of UTC nanoseconds."""
    return utc_of(utc_ns).isoformat().replace("+00:00", "Z")
