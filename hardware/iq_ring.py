"""The last few seconds of a stream's samples as they came, with their boot times and places."""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass

from monitor.core.readings import NS_PER_S

BYTES_PER_SAMPLE = 2


@dataclass(frozen=True, slots=True)
class Run:
    """Samples that follow each other without a gap, all from one place of the tuner.

    start_ns: boot time of the first; place: number of the place; raw: I and Q, a byte each.
    """

    start_ns: int
    place: int
    raw: bytes

    @property
    def samples(self) -> int:
        """How many."""
        return len(self.raw) // BYTES_PER_SAMPLE


@dataclass(frozen=True, slots=True)
class Cutting:
    """Samples round a moment, in the order of time; mark: number of the sample taken then, None
    where the moment lies outside of what was left in the ring."""

    runs: tuple[Run, ...]
    mark: int | None


@dataclass(frozen=True, slots=True)
class _Piece:
    run: Run
    first: int
    joins: bool


class Ring:
    """Keeps so many seconds of samples; what is older falls out as new ones come."""

    def __init__(self, rate_hz: float, seconds: float) -> None:
        self._rate_hz = rate_hz
        self._most = round(rate_hz * seconds)
        self._pieces: deque[_Piece] = deque()
        self._joins = False
        self.samples = 0

    def add(self, raw: bytes | memoryview, start_ns: int, place: int, first: int) -> None:
        """Samples that begin at start_ns (boot time); first: number of the first in the stream."""
        last = self._pieces[-1] if self._pieces else None
        joins = (
            self._joins
            and last is not None
            and (last.run.place, last.first + last.run.samples) == (place, first)
        )
        piece = _Piece(Run(start_ns, place, bytes(raw)), first, joins)
        self._pieces.append(piece)
        self.samples += piece.run.samples
        self._joins = True
        while self.samples - self._pieces[0].run.samples >= self._most:
            self.samples -= self._pieces.popleft().run.samples

    def cut(self) -> None:
        """What comes does not join on to what came: samples were lost, or it is a new stream."""
        self._joins = False

    def after(self, at_ns: int) -> int:
        """How many samples are there from a boot time on."""
        return self.samples - self._position(at_ns)[0]

    def around(self, at_ns: int, samples: int) -> Cutting:
        """So many samples round a boot time, as far as they are there; those nearest to it."""
        position, inside = self._position(at_ns)
        low = max(0, min(position - samples // 2, self.samples - samples))
        high = min(self.samples, low + samples)
        runs: list[tuple[Run, list[bytes]]] = []
        begins = 0
        for piece in self._pieces:
            run, ends = piece.run, begins + piece.run.samples
            if ends > low and begins < high:
                left = max(low - begins, 0)
                part = run.raw[2 * left : 2 * (high - begins)]
                if piece.joins and runs:
                    runs[-1][1].append(part)
                else:
                    start_ns = run.start_ns + round(left * NS_PER_S / self._rate_hz)
                    runs.append((Run(start_ns, run.place, b""), [part]))
            begins = ends
        joined = tuple(Run(run.start_ns, run.place, b"".join(parts)) for run, parts in runs)
        return Cutting(joined, position - low if inside and position < high else None)

    def _position(self, at_ns: int) -> tuple[int, bool]:
        """Number, from the ring's first sample on, of the first one at or after a boot time, and
        whether the ring reaches from before that time to after it."""
        begins = 0
        for piece in self._pieces:
            late = round((at_ns - piece.run.start_ns) * self._rate_hz / NS_PER_S)
            if late < piece.run.samples:
                return begins + max(late, 0), late >= 0 or begins > 0
            begins += piece.run.samples
        return begins, False
