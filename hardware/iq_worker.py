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

from hardware.iq_client import Radio
from hardware.iq_plan import Part, Tune
from hardware.iq_receiver import Reading, Receiver, Scheme

SAY_S = 0.5
"""A line comes at least so often, with or without a reading."""


def settings_text(radio: Radio, scheme: Scheme, seed: int | None = None) -> str:
    """All that the process must know, as JSON."""
    tunes = [
        [tune.centre_hz, [[part.channel, part.low_hz, part.high_hz] for part in tune.parts]]
        for tune in scheme.tunes
    ]
    own = {
        "radio": [radio.host, radio.port, radio.rate_hz, radio.gain_db, radio.ppm],
        "tunes": tunes,
        "scheme": [
            scheme.channels, scheme.fft, scheme.interval_s, scheme.dwell_s, scheme.settle_s,
        ],
        "seed": seed,
    }  # fmt: skip
    return json.dumps(own)


def receiver_of(text: str, now_ns: Callable[[], int]) -> Receiver:
    """The receiver of these settings."""
    own = json.loads(text)
    tunes = tuple(
        Tune(centre_hz, tuple(Part(*part) for part in parts)) for centre_hz, parts in own["tunes"]
    )
    channels, fft, interval_s, dwell_s, settle_s = own["scheme"]
    scheme = Scheme(channels, tunes, fft, interval_s, dwell_s, settle_s)
    return Receiver(Radio(*own["radio"]), scheme, now_ns, own["seed"])


def line_of(reading: Reading | None, receiver: Receiver, unsaid: int) -> bytes:
    """One line: a reading, or that there was none until then; and how the receiver is."""
    said: dict[str, object] = {
        "upto": reading.end_ns if reading else receiver.upto_ns,
        "problem": receiver.problem,
        "told": receiver.client.told,
        "counters": receiver.client.counters | receiver.counters | {"unsaid": unsaid},
    }
    if reading:
        said |= {"at": reading.start_ns, "counts": reading.counts, "clipped": reading.clipped}
    return json.dumps(said, separators=(",", ":")).encode() + b"\n"


def run(receiver: Receiver, now_ns: Callable[[], int], source: int, sink: int) -> None:
    """Work until the descriptor source ends. A reader that does not read loses lines, counted."""
    os.set_blocking(sink, False)
    receiver.client.watch(source)
    said_ns, unsaid, problem = 0, 0, ""
    while not select.select([source], [], [], 0)[0]:
        readings = receiver.work(SAY_S)
        due = now_ns() - said_ns >= SAY_S * 1e9 or receiver.problem != problem
        nothing: list[Reading | None] = [None] if due else []
        for reading in readings or nothing:
            said_ns, problem = now_ns(), receiver.problem
            try:
                os.write(sink, line_of(reading, receiver, unsaid))
            except BlockingIOError:
                unsaid += 1
            except BrokenPipeError:
                return


def _boot_ns() -> int:
    return time.clock_gettime_ns(time.CLOCK_BOOTTIME)


def main(arguments: Sequence[str]) -> None:
    """The process; arguments as in sys.argv."""
    receiver = receiver_of(arguments[1], _boot_ns)
    try:
        run(receiver, _boot_ns, 0, 1)
    finally:
        receiver.close()


if __name__ == "__main__":
    main(sys.argv)
