"""The receiver's check of itself: now and then the gain is stepped on purpose, for a short time."""

from __future__ import annotations

from collections.abc import Sequence
from random import Random

import numpy as np
from numpy.typing import NDArray

from hardware.iq_levels import DATATYPE, counts
from hardware.iq_plan import Tune
from monitor.core.gain_check import PAIRS, both_db, moved, stretch_db
from monitor.core.image import Image
from monitor.core.readings import NS_PER_S

NS_PER_H = 3600 * NS_PER_S
EARLIEST_NS = 60 * NS_PER_S
"""After a start the noise floor must be known first."""
AGAIN_NS = 600 * NS_PER_S
"""A check that broke off is tried again after so long."""
STRETCH_S = 1.0
LOOK_SAMPLES = 8192
Check = dict[str, object]


class GainCheck:
    """When a check is due and what it found. every_h: one at random in each such period.

    gain_db, other_db: the gain that is set and the one that is stepped to; readings: of a stretch;
    tunes, images: what is looked at for images at each place of the tuner.
    """

    def __init__(
        self, every_h: float, gain_db: float, other_db: float, readings: int, now_ns: int,
        draws: Random, tunes: Sequence[Tune] = (), images: Sequence[Image] = (),
    ) -> None:  # fmt: skip
        self._period_ns = round(every_h * NS_PER_H)
        self._gains = (gain_db, other_db)
        self._readings = readings
        self._draws = draws
        self._began_ns = now_ns
        self._due_ns = max(now_ns + EARLIEST_NS, self._drawn())
        self._levels: list[NDArray[np.float64]] = []
        self._powers: list[NDArray[np.float64]] = []
        self._tunes, self._images = tunes, images
        self.active = False
        self.done: list[Check] = []

    def due(self, now_ns: int) -> bool:
        """Whether one is to begin now."""
        return not self.active and now_ns >= self._due_ns

    def begin(self, now_ns: int) -> None:
        """From now on readings belong to the check; the first are at the gain that is set."""
        self._began_ns += self._period_ns
        while self._began_ns + self._period_ns <= now_ns:
            self._began_ns += self._period_ns
        self._due_ns = self._drawn()
        self._levels, self._powers, self.active = [], [], True

    def show(self, place: int, raw: memoryview) -> None:
        """Samples of the check: those at the gain that is set are looked at for images, one piece
        of LOOK_SAMPLES at the most of each that comes."""
        if self._images and len(self._levels) % 2 == 0:
            self._images[place].add(raw[: 2 * LOOK_SAMPLES], DATATYPE)

    def take(self, powers: NDArray[np.float64], floors: tuple[int, ...]) -> float | None:
        """A reading (c,), 1.0 = 0 dBFS. The gain to be set now, None to leave it.

        floors: noise at the gain that is set, milli-dBFS.
        """
        self._powers.append(powers.copy())
        if len(self._powers) < self._readings:
            return None
        self._levels.append(stretch_db(np.array(self._powers)))
        self._powers = []
        if len(self._levels) <= 2 * PAIRS:
            return self._gains[len(self._levels) % 2]
        self._finish(floors)
        return None

    def give_up(self, now_ns: int) -> None:
        """The stream broke: what was begun is worth nothing."""
        self.active = False
        self._due_ns = min(self._due_ns, now_ns + AGAIN_NS)

    def _image_shares(self) -> list[float | None]:
        """Per channel; None where it is not known."""
        sums: dict[int, list[float]] = {}
        for tune, image in zip(self._tunes, self._images):
            for part, mirrored, power in zip(tune.parts, *image.powers()):
                known = sums.setdefault(part.channel, [0.0, 0.0])
                known[0] += float(mirrored)
                known[1] += float(power)
        shares = [
            image / power if power > 0.0 else None
            for image, power in (sums[channel] for channel in sorted(sums))
        ]
        return [None if share is None else round(share, 4) for share in shares]

    def _drawn(self) -> int:
        return self._began_ns + round(self._draws.random() * self._period_ns)

    def _finish(self, floors: tuple[int, ...]) -> None:
        self.active = False
        levels_db = np.array(self._levels)
        found, (own_db, other_db) = moved(levels_db), both_db(levels_db)
        self.done.append(
            {
                "gain_db": self._gains[0],
                "other_db": self._gains[1],
                "levels": counts(10.0 ** (own_db / 10.0)).tolist(),
                "other_levels": counts(10.0 ** (other_db / 10.0)).tolist(),
                "floors": list(floors),
                "image_shares": self._image_shares(),
                "moved_db": [round(x, 3) for x in found.db.tolist()],
                "u_db": [round(x, 3) for x in found.u_db.tolist()],
            }
        )
