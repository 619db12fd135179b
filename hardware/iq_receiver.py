"""A stream of samples turned into readings: tune, let settle, count, measure, tune again."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from random import Random

import numpy as np

from hardware.iq_client import Client, Radio
from hardware.iq_count import SampleClock, real_rate_hz
from hardware.iq_floor import Floors
from hardware.iq_gain_check import STRETCH_S, Check, GainCheck
from hardware.iq_levels import Levels, counts, spike_hz
from hardware.iq_picture import Picture
from hardware.iq_plan import Tune
from hardware.iq_ring import Ring
from monitor.core.image import Image
from monitor.core.readings import NS_PER_S


@dataclass(frozen=True, slots=True)
class Scheme:
    """How long is measured. interval_s: of one reading where one place of the tuner shows all;
    dwell_s: at each place where there are several; settle_s: what is left out after tuning.
    check_h: how often the gain is stepped on purpose, 0 for never; check_db: the gain stepped to.
    """

    channels: int
    tunes: tuple[Tune, ...]
    fft: int
    interval_s: float
    dwell_s: float
    settle_s: float
    check_h: float = 0.0
    check_db: float = 0.0

    @property
    def swept(self) -> bool:
        """Whether the bands are looked at one after the other."""
        return len(self.tunes) > 1

    @property
    def reading_s(self) -> float:
        """Over how long a reading averages."""
        return self.dwell_s if self.swept else self.interval_s

    @property
    def round_s(self) -> float:
        """The longest time from one reading to the next: a dwell may begin a dwell late."""
        if not self.swept:
            return self.interval_s
        return len(self.tunes) * (self.settle_s + 2.0 * self.dwell_s)


@dataclass(frozen=True, slots=True)
class Reading:
    """Of all channels. start_ns: boot time of its first sample; end_ns: nothing else before it.

    counts: milli-dBFS per channel; clipped: components at a rail.
    """

    start_ns: int
    end_ns: int
    counts: tuple[int, ...]
    clipped: int


class Receiver:
    """One receiver at work. now_ns: a clock that never jumps (ns); seed: None takes the system's;
    ring: keeps the samples that were measured; picture: looks at them.

    Where the bands are swept, each round takes the places in a new order, and each dwell begins at
    random within a dwell's length, so that nothing periodic keeps step. A round is one reading,
    stamped with its first sample.
    """

    def __init__(
        self, radio: Radio, scheme: Scheme, now_ns: Callable[[], int], seed: int | None = None,
        ring: Ring | None = None, picture: Picture | None = None,
    ) -> None:  # fmt: skip
        self._scheme = scheme
        self._now_ns = now_ns
        self._ring, self._picture = ring, picture
        self._draws = Random(seed)
        self._clipped, self._done, self._from_ns, self._start_ns = 0, 0, 0, -1
        self._rate_hz = real_rate_hz(radio.rate_hz)
        half = scheme.fft // 2  # intervals of whole halves of a segment weigh exactly alike
        self._need = max(2, round(scheme.reading_s * self._rate_hz / half)) * half
        self._levels = [
            Levels(self._rate_hz, tune.bands, scheme.fft, tune.spurs) for tune in scheme.tunes
        ]
        self._floors = Floors(self._rate_hz, scheme.tunes, scheme.fft, self._need)
        self.client = Client(radio, scheme.tunes[0].centre_hz, now_ns)
        self._check = gain_check(scheme, radio, now_ns(), self._draws)
        self._gain_db = radio.gain_db
        self._generation = 0
        self._settled_ns = 0
        self._clock: SampleClock | None = None
        self._lost = 0
        self._order: list[int] = []
        self._sums = np.zeros(scheme.channels)
        self._upto_ns = now_ns()
        self.counters = {"samples": 0, "readings": 0, "lost_samples": 0, "clipped_components": 0}
        self.counters |= dict.fromkeys(("check_readings", "gain_checks", "gain_checks_broken"), 0)
        self._begin_round(now_ns())

    @property
    def problem(self) -> str:
        """Why no readings come; empty while they do."""
        if self.client.problem:
            return self.client.problem
        proved = self._clock is not None and self._clock.proved
        return "" if proved else "counts samples, to see whether the rate is the one asked for"

    @property
    def upto_ns(self) -> int:
        """Boot time before which no further reading will lie."""
        if self.problem:  # what begins later is stamped later
            self._upto_ns = max(self._upto_ns, self._now_ns())
        return self._upto_ns

    @property
    def floors(self) -> tuple[int, ...]:
        """Noise floor per channel, milli-dBFS, MISSING where it is not known."""
        return self._floors.counts(self._scheme.channels, self._now_ns())

    def work(self, timeout_s: float) -> list[Reading]:
        """The readings that are complete; waits timeout_s at most for samples."""
        raw = self.client.read(timeout_s)
        now_ns = self._now_ns()
        if self.client.generation != self._generation:
            self._generation = self.client.generation
            self._settled_ns = now_ns + round(self._scheme.settle_s * NS_PER_S)
            self._clock = None
        if not raw or now_ns < self._settled_ns:
            return []
        if self._clock is None:
            self._clock = SampleClock(self._rate_hz, now_ns)
            self._lost = 0
        return self._take(self._clock, raw, now_ns)

    def close(self) -> None:
        """Let the connection go."""
        self.client.close()

    def _take(self, clock: SampleClock, raw: bytes, now_ns: int) -> list[Reading]:
        first, was_proved = clock.samples, clock.proved
        clock.count(len(raw) // 2, now_ns)
        self.counters["samples"] += len(raw) // 2
        if clock.lost != self._lost:
            self.counters["lost_samples"] += clock.lost - self._lost
            self._lost = clock.lost
            self._restart(now_ns)
        if clock.fault:
            self.client.reopen("wrong", clock.fault)
            self._clock = None
            return []
        if not clock.proved:
            return []
        if not was_proved:
            self.client.well()
            self._restart(now_ns)
        return self._measure(clock, first, memoryview(raw))

    def _restart(self, now_ns: int) -> None:
        """Whatever was begun does not join on to what comes: leave it."""
        settle = self._check is not None and self._check.active
        if self._check is not None and settle:
            self._check.give_up(now_ns)
            self.counters["gain_checks_broken"] += 1
            self.client.gain(self._gain_db)
        self._leave()
        self._begin_round(now_ns, settle)

    def _leave(self) -> None:
        for level in self._levels:
            level.drop()
        self._floors.leave()
        if self._ring is not None:
            self._ring.cut()

    def checked(self) -> list[Check]:
        """What checks of the gain found, since the last call."""
        if self._check is None:
            return []
        done, self._check.done = self._check.done, []
        return done

    def _begin_round(self, now_ns: int, settle: bool = False) -> None:
        self._order = list(range(len(self._scheme.tunes)))
        self._draws.shuffle(self._order)
        self._sums[:] = 0.0
        self._clipped = 0
        self._start_ns = -1
        self._tune(now_ns)
        if settle:
            self._from_ns = max(self._from_ns, now_ns + round(self._scheme.settle_s * NS_PER_S))

    def _tune(self, now_ns: int) -> None:
        """Go to the first place of the order; where there is one only, no sample is left out."""
        self._done = self._from_ns = 0
        if self._scheme.swept:
            wait_s = self._scheme.settle_s + self._draws.random() * self._scheme.dwell_s
            self._from_ns = now_ns + round(wait_s * NS_PER_S)
            self.client.tune(self._scheme.tunes[self._order[0]].centre_hz)

    def _measure(self, clock: SampleClock, first: int, raw: memoryview) -> list[Reading]:
        """Samples from number first on; those taken before the receiver had settled are left."""
        found: list[Reading] = []
        at = 0
        while True:
            if self._done == 0:
                at = max(at, clock.sample_at(self._from_ns) - first)
            n = min(self._need - self._done, len(raw) // 2 - at)
            if n <= 0:
                return found
            if self._done == 0 and self._start_ns < 0:
                self._start_ns = max(clock.time_ns(first + at), self._upto_ns)
            part = raw[2 * at : 2 * (at + n)]
            self._levels[self._order[0]].add(part)
            if self._check is not None and self._check.active:
                self._check.show(self._order[0], part)
            else:
                self._show(part, clock.time_ns(first + at), first + at)
            self._done += n
            at += n
            if self._done == self._need:
                found += self._dwelt(clock.time_ns(first + at))

    def _show(self, raw: memoryview, at_ns: int, sample: int) -> None:
        """Samples at the gain that is set, with time and number, to all that looks at them."""
        place = self._order[0]
        self._floors.offer(place, raw, at_ns)
        if self._ring is not None:
            self._ring.add(raw, at_ns, place, sample)
        if self._picture is not None:
            self._picture.add(place, raw, at_ns)

    def _dwelt(self, end_ns: int) -> Sequence[Reading]:
        """A dwell is over: on to the next place, or the round is a reading."""
        place = self._order.pop(0)
        powers, clipped = self._levels[place].take()
        for part, power in zip(self._scheme.tunes[place].parts, powers):
            self._sums[part.channel] += power
        if self._scheme.swept:
            self._levels[place].drop()
            self._floors.leave()
        self._clipped += clipped
        self.counters["clipped_components"] += clipped
        if self._order:
            self._tune(self._now_ns())
            return ()
        self._upto_ns = max(end_ns, self._start_ns + 1)
        if self._check is not None and self._check.active:
            self._checking(self._check)
            return ()
        self.counters["readings"] += 1
        read = tuple(int(count) for count in counts(self._sums))
        reading = Reading(self._start_ns, self._upto_ns, read, self._clipped)
        if self._check is not None and self._check.due(self._now_ns()):
            self._check.begin(self._now_ns())
        self._begin_round(self._now_ns())
        return (reading,)

    def _checking(self, check: GainCheck) -> None:
        """A round belongs to a check and is no reading: on with the check, or back to work."""
        self.counters["check_readings"] += 1
        gain_db = check.take(self._sums, self.floors)
        self.counters["gain_checks"] += not check.active
        if gain_db is not None:
            self.client.gain(gain_db)
            self._leave()
        self._begin_round(self._now_ns(), settle=gain_db is not None)


def gain_check(scheme: Scheme, radio: Radio, now_ns: int, draws: Random) -> GainCheck | None:
    """The receiver's check of its gain, where one is asked for."""
    if not scheme.check_h:
        return None
    readings = 1 if scheme.swept else max(1, round(STRETCH_S / scheme.reading_s))
    rate_hz = real_rate_hz(radio.rate_hz)
    spike = spike_hz(rate_hz, scheme.fft)
    images = [Image(rate_hz, tune.bands, scheme.fft, spike) for tune in scheme.tunes]
    return GainCheck(
        scheme.check_h, radio.gain_db, scheme.check_db, readings, now_ns, draws, scheme.tunes,
        images,
    )  # fmt: skip
