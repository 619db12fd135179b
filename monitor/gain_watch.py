"""What a receiver's checks of its gain say, as events and an alarm of the daemon."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from typing import Any

from monitor.calfile import fit_of
from monitor.calparts import CalibrationFile, parse
from monitor.config import Band, Channel
from monitor.core.calibration import Chain
from monitor.core.errors import CalibrationError, ConfigError
from monitor.core.gain_check import KEY, KIND, Found, judged
from monitor.core.image import NOTABLE
from monitor.core.law import ScaleLaw
from monitor.core.readings import MISSING
from monitor.core.rows import Event
from monitor.detectorkinds import ScaleSource
from monitor.receiver import gain_named

WHY = {
    "more": "products of other signals, made in the receiver, are in it",
    "less": "the receiver is driven too hard, or makes a line of its own there",
}
Said = Mapping[str, Any]


class GainWatch:
    """front: a front end; one without checks of its gain is never asked again."""

    def __init__(
        self, front: object, channels: Sequence[Channel], bands: Mapping[str, Band], chain: Chain
    ) -> None:
        self._checked: Callable[[], list[Said]] | None = getattr(front, "checked", None)
        self._channels, self._bands = channels, bands
        self._file = parse(chain.document) if self._checked else None

    def look(self, at_ns: int, raised: frozenset[str]) -> list[Event]:
        """Events of the checks that are done, at at_ns. raised: keys of alarms that stand."""
        events: list[Event] = []
        if self._checked is None or self._file is None:
            return events
        for said in self._checked():
            found = [self._found(self._file, said, i) for i in range(len(self._channels))]
            texts = [
                f"{channel.name} moved {one.moved_db:+.1f} dB (+-{one.u_db:.1f}), "
                f"the gain {one.step_db:+.1f} dB: {one.said}"
                for channel, one in zip(self._channels, found)
            ]
            shares = said.get("image_shares") or [None] * len(found)
            body = self._body(said, found, shares, "; ".join(texts))
            events.append(Event(at_ns, KIND, "", body))
            bad = self._suspicions(found, shares)
            known = any(one.said == "as the gain" for one in found)
            if bool(bad) != (KEY in raised) and (bad or known):
                told: dict[str, object] = {"raised": bool(bad), "text": "; ".join(bad)}
                events.append(Event(at_ns, "alarm", KEY, told))
                raised = raised | {KEY} if bad else raised - {KEY}
        return events

    def _suspicions(self, found: Sequence[Found], shares: Sequence[float | None]) -> list[str]:
        texts = [
            f"{channel.name} moved {one.moved_db:+.1f} dB where the gain moved {one.step_db:+.1f}: "
            f"{WHY[one.said]}"
            for channel, one in zip(self._channels, found)
            if one.suspected
        ]
        return texts + [
            f"{channel.name}: {share:.0%} of it is the image of what lies on the other side of the "
            "centre; move centre_hz"
            for channel, share in zip(self._channels, shares)
            if share is not None and share >= NOTABLE
        ]

    def _body(
        self, said: Said, found: Sequence[Found], shares: Sequence[float | None], text: str
    ) -> dict[str, object]:
        own = {key: said[key] for key in ("gain_db", "other_db")}
        bands = [
            {
                "channel": channel.name, "moved_db": one.moved_db, "u_db": one.u_db,
                "step_db": one.step_db, "said": one.said, "image_share": share,
            }
            for channel, one, share in zip(self._channels, found, shares)
        ]  # fmt: skip
        return own | {"channels": bands, "text": text}

    def _found(self, file: CalibrationFile, said: Said, i: int) -> Found:
        own_db, other_db = float(said["gain_db"]), float(said["other_db"])
        step_db, calibrated = self._step_db(file, i, own_db, other_db)
        floor, least = said["floors"][i], min(said["levels"][i], said["other_levels"][i])
        floor_db = math.nan if floor == MISSING else floor / 1000.0
        if other_db > own_db:  # the floor was tracked at the lower gain
            floor_db += step_db
        return judged(
            float(said["moved_db"][i]), float(said["u_db"][i]), step_db,
            calibrated=calibrated, least_dbfs=least / 1000.0, floor_dbfs=floor_db,
        )  # fmt: skip

    def _step_db(
        self, file: CalibrationFile, i: int, own_db: float, other_db: float
    ) -> tuple[float, bool]:
        """By how much dBFS move with the gain: by the calibration of both steps, else nominal."""
        channel = self._channels[i]
        offsets = [self._offset_db(file, channel, gain_db) for gain_db in (own_db, other_db)]
        if offsets[0] is not None and offsets[1] is not None:
            return offsets[0] - offsets[1], True
        return other_db - own_db, False

    def _offset_db(self, file: CalibrationFile, channel: Channel, gain_db: float) -> float | None:
        """dBm of 0 dBFS in the channel's band at a gain; None where that is not calibrated."""
        for detector in file.detectors:
            if not isinstance(detector.source, ScaleSource):
                return None
            names = [step.gain for step in detector.source.steps if gain_named(step.gain, gain_db)]
            if detector.axis in ("", channel.axis) and names:
                named = replace(channel, gain=names[0])
                try:
                    law = fit_of(file, named, self._bands[channel.band]).law
                except (CalibrationError, ConfigError):  # that step is not known in this band
                    return None
                return law.offset_db if isinstance(law, ScaleLaw) else None
        return None
