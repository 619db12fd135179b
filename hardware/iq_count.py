"""Time of samples that carry none: counted against the boot clock, which also finds lost ones."""

from __future__ import annotations

from dataclasses import dataclass, field

from monitor.core.readings import NS_PER_S

BUFFER_SAMPLES = 131_072
"""What a server sends at once: 262 144 bytes (IQ.md)."""
BUFFERS = 2
"""Fewer or more samples than that within a stretch are no sign of loss."""
TRIAL_S = 1.0
STRETCH_S = 10.0
LATE_S = 2.0
"""Samples that come so much later than they were taken are old ones from a queue."""
DRIFT = 200e-6
"""How far the receiver's crystal may be off (our choice; tens of ppm are common)."""
CRYSTAL_HZ = 28.8e6
RATES_HZ = ((225_001, 300_000), (900_001, 3_200_000))
"""What a server accepts (IQ.md)."""


def real_rate_hz(asked_hz: int) -> float:
    """The rate that the receiver can make next to the one asked for: a divider in steps of 4."""
    ratio = int(CRYSTAL_HZ * (1 << 22) / asked_hz) & ~3
    return CRYSTAL_HZ * (1 << 22) / ratio


def trial_s(rate_hz: float) -> float:
    """How long samples are counted before the first reading: TRIAL_S or eight buffers."""
    return max(TRIAL_S, 8 * BUFFER_SAMPLES / rate_hz)


@dataclass(slots=True)
class Stretch:
    """A stretch of the stream that is being judged: when it began, what came early and late.

    last_ns: its end, in which nothing may be missing. again: it was made longer by as much.
    """

    start_ns: int
    length_ns: int
    last_ns: int
    again: bool = False
    early_ns: float = 0.0
    least_late_ns: float = field(default=float("inf"))


class SampleClock:
    """Places samples on the boot clock by their number, the earliest arrivals leading.

    proved: the rate was right over the first stretch, TRIAL_S or eight buffers. lost: samples that
    never came, so far. fault: why the stream cannot be used, "" while it can: a loss in the first
    STRETCH_S after that, or in two such stretches on end, is taken for a wrong rate. Resolution:
    two buffers, over STRETCH_S; smaller losses add up until they are found.
    """

    def __init__(self, rate_hz: float, now_ns: int) -> None:
        self._rate_hz = rate_hz
        self._ns_per_sample = NS_PER_S / rate_hz
        self._buffer_ns = BUFFER_SAMPLES * self._ns_per_sample
        self._base_ns: float | None = None
        self._stretch = self._begun(now_ns, int(trial_s(rate_hz) * NS_PER_S))
        self._surplus_ns = 0.0
        self._short = True
        self.samples = 0
        self.proved = False
        self.lost = 0
        self.fault = ""

    @property
    def resolution_s(self) -> float:
        """What loss within STRETCH_S is found for sure, as time."""
        return BUFFERS * self._buffer_ns / NS_PER_S

    def time_ns(self, sample: int) -> int:
        """Boot time of a sample by its number."""
        return round((self._base_ns or 0.0) + sample * self._ns_per_sample)

    def sample_at(self, at_ns: int) -> int:
        """Number of the first sample taken at or after a boot time."""
        return max(0, -int(((self._base_ns or 0.0) - at_ns) // self._ns_per_sample))

    def count(self, n: int, now_ns: int) -> None:
        """n more samples came until now."""
        self.samples += n
        if self._base_ns is None:
            self._base_ns = now_ns - n * self._ns_per_sample
            self._stretch.start_ns = now_ns
            return
        stretch = self._stretch
        late_ns = now_ns - self._base_ns - self.samples * self._ns_per_sample
        if late_ns < 0:
            self._base_ns += late_ns
            stretch.early_ns -= late_ns
        end_ns = stretch.start_ns + stretch.length_ns
        if now_ns >= end_ns - stretch.last_ns:
            stretch.least_late_ns = min(stretch.least_late_ns, max(late_ns, 0.0))
        if late_ns > LATE_S * NS_PER_S and not self.fault:
            self.fault = f"samples come {late_ns / NS_PER_S:.1f} s late: old, lost, or a lower rate"
        elif now_ns >= end_ns:
            if stretch.least_late_ns > BUFFERS * self._buffer_ns and not stretch.again:
                stretch.length_ns += stretch.last_ns  # what only was late may be on its way
                stretch.again = True
                return
            self._judge(now_ns)

    def _begun(self, now_ns: int, length_ns: int) -> Stretch:
        return Stretch(now_ns, length_ns, int(max(length_ns / 10, 4 * self._buffer_ns)))

    def _judge(self, now_ns: int) -> None:
        stretch = self._stretch
        seconds = (now_ns - stretch.start_ns) / NS_PER_S
        most_ns, drift_ns = BUFFERS * self._buffer_ns, DRIFT * seconds * NS_PER_S
        short_ns = stretch.least_late_ns
        self._surplus_ns = max(0.0, self._surplus_ns + stretch.early_ns - drift_ns)
        if self._surplus_ns > most_ns:
            self._off(1.0 + self._surplus_ns / NS_PER_S / seconds)
        elif short_ns > most_ns:
            if self._short:
                self._off(1.0 - short_ns / NS_PER_S / seconds)
            self.lost += round(short_ns / self._ns_per_sample)
        if self._base_ns is not None:
            self._base_ns += short_ns if short_ns > most_ns else min(short_ns, drift_ns)
        self._short = short_ns > most_ns or not self.proved
        if not self.proved:  # the first arrivals may have been late by a buffer or two
            self.proved, self._surplus_ns = not self.fault, 0.0
        self._stretch = self._begun(now_ns, int(STRETCH_S * NS_PER_S))

    def _off(self, share: float) -> None:
        got, asked = self._rate_hz * share / 1e6, self._rate_hz / 1e6
        self.fault = f"about {got:.3g} million samples a second came, {asked:.3g} were asked for"
