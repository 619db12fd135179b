"""The receiver's own process: samples come in, one line of JSON a reading goes out.

Started by iq_stream.py with its settings as one argument; ends when its standard input does.
"""

from __future__ import annotations

import json
import os
import select
import sys
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from random import Random

from hardware.iq_client import Radio
from hardware.iq_count import real_rate_hz
from hardware.iq_keep import Keeper, ring_for
from hardware.iq_picture import Picture
from hardware.iq_plan import Part, Tune
from hardware.iq_receiver import Reading, Receiver, Scheme

SAY_S = 0.5
"""A line comes at least so often, with or without a reading."""


def settings_text(
    radio: Radio, scheme: Scheme, seed: int | None = None, evidence_bytes: int = 0
) -> str:
    """All that the process must know, as JSON. evidence_bytes: for recordings, 0 for none."""
    tunes = [
        [
            tune.centre_hz,
            [[part.channel, part.low_hz, part.high_hz] for part in tune.parts],
            tune.spurs,
        ]
        for tune in scheme.tunes
    ]
    own = {
        "radio": [radio.host, radio.port, radio.rate_hz, radio.gain_db, radio.ppm],
        "tunes": tunes,
        "scheme": [
            scheme.channels, scheme.fft, scheme.interval_s, scheme.dwell_s, scheme.settle_s,
            scheme.check_h, scheme.check_db,
        ],
        "seed": seed,
        "evidence": evidence_bytes,
    }  # fmt: skip
    return json.dumps(own)


@dataclass(frozen=True, slots=True)
class Work:
    """What the process does: the receiver, what looks at its samples, and what keeps some."""

    receiver: Receiver
    picture: Picture
    keeper: Keeper | None

    def close(self) -> None:
        """Let the connection go, and finish what is being written."""
        self.receiver.close()
        if self.keeper is not None:
            self.keeper.close()


def work_of(text: str, now_ns: Callable[[], int]) -> Work:
    """The work of these settings."""
    own = json.loads(text)
    tunes = tuple(
        Tune(centre_hz, tuple(Part(*part) for part in parts), tuple((a, b) for a, b in spurs))
        for centre_hz, parts, spurs in own["tunes"]
    )
    channels, *rest = own["scheme"]
    scheme = Scheme(channels, tunes, *rest)
    radio, rate_hz = Radio(*own["radio"]), real_rate_hz(own["radio"][2])
    ring = ring_for(rate_hz, scheme.round_s) if own["evidence"] else None
    picture = Picture(rate_hz, tunes, Random(own["seed"]))
    receiver = Receiver(radio, scheme, now_ns, own["seed"], ring, picture)
    if ring is None:
        return Work(receiver, picture, None)
    about = f"receiver of the 8-bit dongle class, gain {radio.gain_db:g} dB"
    return Work(receiver, picture, Keeper(ring, rate_hz, tunes, own["evidence"], about))


def line_of(reading: Reading | None, receiver: Receiver, unsaid: int) -> bytes:
    """One line: a reading, or that there was none until then; and how the receiver is."""
    said: dict[str, object] = {
        "upto": reading.end_ns if reading else receiver.upto_ns,
        "problem": receiver.problem,
        "told": receiver.client.told,
        "floors": receiver.floors,
        "counters": receiver.client.counters | receiver.counters | {"unsaid": unsaid},
    }
    if reading:
        said |= {"at": reading.start_ns, "counts": reading.counts, "clipped": reading.clipped}
    return json.dumps(said, separators=(",", ":")).encode() + b"\n"


class Speaker:
    """Lines to a descriptor whose reader may not read: then they are lost, and counted."""

    def __init__(self, sink: int) -> None:
        os.set_blocking(sink, False)
        self._sink = sink
        self.unsaid = 0
        self.heard = True

    def say(self, line: bytes) -> bool:
        """Whether the line was taken; a line of up to 4096 bytes is taken whole or not at all."""
        try:
            os.write(self._sink, line)
        except BlockingIOError:
            self.unsaid += 1
            return False
        except BrokenPipeError:
            self.heard = False
            return False
        return True


class Listener:
    """Requests from a descriptor, a line of JSON each."""

    def __init__(self, source: int) -> None:
        self._source, self._rest = source, b""
        self.ended = False

    def requests(self) -> list[dict[str, object]]:
        """What was asked since the last call; does not wait."""
        *lines, self._rest = (self._rest + self._came()).split(b"\n")
        return [json.loads(line) for line in lines]

    def _came(self) -> bytes:
        if self.ended or not select.select([self._source], [], [], 0)[0]:
            return b""
        data = os.read(self._source, 1 << 16)
        self.ended = not data
        return data


def run(work: Work, now_ns: Callable[[], int], source: int, sink: int) -> None:
    """Work until the descriptor source ends. A reader that does not read loses lines, counted."""
    receiver, speaker, listener = work.receiver, Speaker(sink), Listener(source)
    receiver.client.watch(source)
    said_ns, problem = 0, ""
    untold: list[dict[str, object]] = []
    while speaker.heard and not listener.ended:
        readings = receiver.work(SAY_S)
        due = now_ns() - said_ns >= SAY_S * 1e9 or receiver.problem != problem
        nothing: list[Reading | None] = [None] if due else []
        for reading in readings or nothing:
            said_ns, problem = now_ns(), receiver.problem
            speaker.say(line_of(reading, receiver, speaker.unsaid))
        for picture in work.picture.due(now_ns()):
            speaker.say(json.dumps(picture, separators=(",", ":")).encode() + b"\n")
        asked = listener.requests()
        untold += [{"checked": one} for one in receiver.checked()]
        if work.keeper is not None:
            untold += _kept(work.keeper, asked, now_ns())
        while untold and speaker.say(json.dumps(untold[0]).encode() + b"\n"):
            untold = untold[1:]


def _kept(
    keeper: Keeper, asked: Sequence[dict[str, object]], now_ns: int
) -> list[dict[str, object]]:
    """Serve the keeper; what became of requests."""
    for request in asked:
        keeper.ask(request)
    keeper.turn(now_ns)
    return keeper.said()


def _boot_ns() -> int:
    return time.clock_gettime_ns(time.CLOCK_BOOTTIME)


def main(arguments: Sequence[str]) -> None:
    """The process; arguments as in sys.argv."""
    work = work_of(arguments[1], _boot_ns)
    try:
        run(work, _boot_ns, 0, 1)
    finally:
        work.close()


if __name__ == "__main__":
    main(sys.argv)
