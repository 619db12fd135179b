"""The receiver's own noise, tracked while it measures, and what it says of receiver and antenna.

A quiet piece of spectrum in a quiet moment shows the noise and nothing else. Whatever is on the air
only adds to it, so the lowest of many pieces over some time is an upper bound of the noise, but for
the luck of the draw. Methods: minimum statistics (R. Martin, IEEE Trans. Speech Audio Process. 9
(2001) 504, the idea, from memory), with a low quantile in the place of the minimum (our choice).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from monitor.core.alarms import UNKNOWN, AlertRule, Side, follow
from monitor.core.calibration import Chain
from monitor.core.distributions import Real
from monitor.core.quantities import dbm_from_w
from monitor.core.readings import NS_PER_S
from monitor.core.rows import BlockRows, Event

SHARE = 0.1
"""The quantile that is taken for the quiet moments: our choice."""
_Z = -1.2815515655446004
"""Of the normal distribution, of which a share of 0.1 lies below."""
ABOVE, BELOW, VANISHED = "receiver noise high", "receiver noise low", "signals vanished"
KEYS = (ABOVE, BELOW, VANISHED)
NOISE_S = 3600.0
"""For so long the floor must be off the calibrated noise, and right again."""
VANISHED_S, BACK_S = 60.0, 10.0
CARRIED_NS = 600 * NS_PER_S
"""A band that carried signals for so long without a pause is missed when it does not."""
SIGNAL, NOTHING_LEFT = 10.0**0.6, 10.0**0.2
"""6 dB above the noise is a signal, within 2 dB of it is none: our choice."""
COVERAGE = 2.0
_RULES = (
    AlertRule(ABOVE, "", "", "", 0.0, 0.0, NOISE_S, NOISE_S),
    AlertRule(BELOW, "", "", "", 0.0, 0.0, NOISE_S, NOISE_S),
    AlertRule(VANISHED, "", "", "", 0.0, 0.0, VANISHED_S, BACK_S),
)


def quantile_share(independent: float) -> float:
    """The SHARE quantile of noise power over its mean, where each figure is of so many independent
    samples (bandwidth times time): chi squared of twice as many degrees of freedom, by E. B. Wilson
    and M. M. Hilferty, Proc. Natl. Acad. Sci. 17 (1931) 684 (formula from memory, proved in tests).
    """
    part = 2.0 / (9.0 * 2.0 * independent)
    return float((1.0 - part + _Z * np.sqrt(part)) ** 3)


def quiet(cells: Real, independent: float) -> Real:
    """Noise power in each piece of spectrum (k,) from its powers at several times (n, k)."""
    return np.asarray(np.quantile(cells, SHARE, axis=0) / quantile_share(independent))


@dataclass(frozen=True, slots=True)
class Noise:
    """Where a receiver's noise and signals stand. sides: of KEYS, in their order.

    since_ns: i8 (c,), since when a channel has carried signals, -1 where it does not; carried:
    bool (c,), it has for CARRIED_NS.
    """

    sides: tuple[Side, ...]
    since_ns: NDArray[np.int64]
    carried: NDArray[np.bool_]


def start(channels: int, raised: frozenset[str]) -> Noise:
    """Nothing is known but which alarms stand."""
    sides = tuple(Side(0, 0, key in raised, key in raised) for key in KEYS)
    return Noise(sides, np.full(channels, -1, np.int64), np.zeros(channels, np.bool_))


def step(
    state: Noise, rows: BlockRows, floor_w: Real, chain: Chain, names: tuple[str, ...]
) -> tuple[Noise, list[Event]]:
    """Go on by closed blocks. floor_w: f8 (c,), the floor tracked now, W at the port, nan unknown.

    Events are alarms of KEYS; their text names the channels (names) and the figures.
    """
    events: list[Event] = []
    for start_ns in np.unique(rows.start_ns).tolist():
        mine = rows.start_ns == start_ns
        level_w = np.full(len(names), np.nan)
        covered = np.maximum(rows.covered_ns[mine], 1)
        level_w[rows.channel[mine]] = rows.energy_w_ns[mine] / covered
        state, found = _block(state, start_ns, level_w, floor_w, chain, names)
        events += found
    return state, events


def _block(
    state: Noise,
    at_ns: int,
    level_w: Real,
    floor_w: Real,
    chain: Chain,
    names: tuple[str, ...],
) -> tuple[Noise, list[Event]]:
    known_w = np.where(chain.noise_w > 0.0, chain.noise_w, np.nan)
    lowest_w = np.fmin(floor_w, known_w)
    on = level_w > SIGNAL * lowest_w
    since_ns = np.where(on, np.where(state.since_ns < 0, at_ns, state.since_ns), -1)
    carried = state.carried | (on & (at_ns - since_ns >= CARRIED_NS))
    missed = carried & (level_w < NOTHING_LEFT * lowest_w)
    gone = carried.any() and bool(np.array_equal(missed, carried))
    off_w = floor_w - known_w
    allowed_w = COVERAGE * chain.noise_u_w
    compared = ~np.isnan(off_w)
    high, low = compared & (off_w > allowed_w), compared & (off_w < -allowed_w)
    found = (
        (_code(bool(high.any()), bool(compared.any())), high),
        (_code(bool(low.any()), bool(compared.any())), low),
        (1 if gone else -1 if on.any() else UNKNOWN, missed),
    )
    sides, events = [], []
    for key, rule, side, (code, which) in zip(KEYS, _RULES, state.sides, found):
        followed = follow(side, np.array([at_ns]), np.array([code], np.int8), rule)
        sides.append(followed.side)
        for _, raised in followed.changes:
            text = _text(key, which, level_w, floor_w, known_w, names) if raised else ""
            events.append(Event(at_ns, "alarm", key, {"raised": raised, "text": text}))
    return replace(state, sides=tuple(sides), since_ns=since_ns, carried=carried), events


def _code(bad: bool, known: bool) -> int:
    return 1 if bad else -1 if known else UNKNOWN


def _text(
    key: str,
    which: NDArray[np.bool_],
    level_w: Real,
    floor_w: Real,
    known_w: Real,
    names: tuple[str, ...],
) -> str:
    parts = []
    for channel in np.flatnonzero(which).tolist():
        if key == VANISHED:
            parts.append(f"{names[channel]} at {dbm_from_w(level_w[channel]):.1f} dBm, its noise")
        else:
            found, known = dbm_from_w(floor_w[channel]), dbm_from_w(known_w[channel])
            parts.append(f"{names[channel]} {found:.1f} dBm, calibrated {known:.1f} dBm")
    why = {
        ABOVE: "something new disturbs it, or signals fill the band and both its sides",
        BELOW: "gain is lost in the receiver or before it: levels read too low",
        VANISHED: "all that these bands carried: look at antenna and cable",
    }
    return f"{'; '.join(parts)}; {why[key]}"
