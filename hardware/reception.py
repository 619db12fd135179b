"""What of a board's frames is taken: order of numbers and ticks, the banner's word. Pure."""

from __future__ import annotations

from collections import deque
from typing import NamedTuple

from hardware.frames import Banner, Frame, FrameParser

_KEYS = (
    "frames",
    "samples",
    "banners",
    "lost",
    "repeated",
    "contradicting",
    "restarts",
    "unannounced",
    "refused",
    "unplaced",
)
_REMEMBERED = 16


class Taken(NamedTuple):
    """A frame that is taken. Its samples are evenly spaced over (since_ms, frame.tick_ms].

    since_ms is None where the spacing is unknown: only the last sample has a place in time. It
    is below 0 where the first sample was taken as the board's ticks began.
    restarted: the board's ticks began anew with this frame.
    """

    frame: Frame
    since_ms: int | None
    restarted: bool


class Reception:
    """Everything between the bytes and the frames that become readings."""

    def __init__(self, channels: int, simulated: bool) -> None:
        self._channels = channels
        self._simulated = simulated
        self._parser = FrameParser()
        self._counters = dict.fromkeys(_KEYS, 0)
        self._last: Frame | None = None
        self._recent: deque[bytes] = deque(maxlen=_REMEMBERED)
        self.banner: Banner | None = None
        self.refusal = ""
        """Why no readings are given, empty where they are."""

    @property
    def counters(self) -> dict[str, int]:
        """Every kind of thing that came, and how often."""
        return self._counters | self._parser.counters

    @property
    def frames_seen(self) -> int:
        """Frames that were new, taken or not: a board that only repeats itself shows no life."""
        return sum(self._counters[kind] for kind in ("frames", "unannounced", "refused"))

    def reopened(self) -> None:
        """The port was opened: another board may be at its end, which must name itself."""
        self._parser.restart()
        self.banner = None
        self.refusal = ""

    def feed(self, data: bytes) -> list[Taken]:
        """The frames to take from these bytes, in their order."""
        taken = []
        for item in self._parser.feed(data):
            if isinstance(item, Banner):
                self._announce(item)
            elif self._admitted(item):
                accepted = self._in_order(item)
                if accepted is not None:
                    taken.append(accepted)
        return taken

    def _announce(self, banner: Banner) -> None:
        self._counters["banners"] += 1
        self.banner = banner
        self.refusal = ""
        if banner.simulated != self._simulated:
            says, site = ("simulated", "false") if banner.simulated else ("real", "true")
            self.refusal = (
                f"board {banner.name} says that it is {says}, the site says simulated = {site};"
                " its readings are refused"
            )
        elif banner.channels != self._channels:
            self.refusal = (
                f"board {banner.name} has {banner.channels} channels, the site file names"
                f" {self._channels}; its readings are refused"
            )

    def _admitted(self, frame: Frame) -> bool:
        if self.banner is None:
            self._counters["unannounced"] += 1
        elif self.refusal:
            self._counters["refused"] += 1
        elif frame.channels != self._channels:
            self._counters["contradicting"] += 1
        else:
            return True
        return False

    def _in_order(self, frame: Frame) -> Taken | None:
        last = self._last
        if last is None:
            return self._take(frame, None, False)
        if frame.body in self._recent:
            self._counters["repeated"] += 1
            return None
        if frame.tick_ms < last.tick_ms:
            self._counters["restarts"] += 1
            return self._take(frame, None, True)
        missing = (frame.seq - last.seq - 1) & 0xFFFF
        if frame.tick_ms == last.tick_ms or missing == 0xFFFF:
            self._counters["contradicting"] += 1
            return None
        self._counters["lost"] += missing
        return self._take(frame, last.tick_ms, False, contiguous=missing == 0)

    def _take(
        self, frame: Frame, last_ms: int | None, restarted: bool, contiguous: bool = False
    ) -> Taken:
        samples = frame.samples
        since_ms = last_ms if contiguous else self._from_spacing(frame, samples, last_ms)
        if since_ms is None:
            self._counters["unplaced"] += samples - 1
        self._counters["frames"] += 1
        self._counters["samples"] += samples
        self._last = frame
        self._recent.append(frame.body)
        return Taken(frame, since_ms, restarted)

    def _from_spacing(self, frame: Frame, samples: int, last_ms: int | None) -> int | None:
        spacing_ms = self.banner.spacing_ms if self.banner else 0
        if not spacing_ms:
            return None
        since_ms = frame.tick_ms - samples * spacing_ms
        return since_ms if last_ms is None else max(since_ms, last_ms)
