"""Bridge from a receiver that SoapySDR reaches to the wire of IQ.md: one client, a fixed gain.

A program of its own for the Python that has the SoapySDR binding, commonly the system's: it imports
nothing of Fieldsill and nothing but numpy and that binding besides the standard library. SOAPY.md.
"""

from __future__ import annotations

import argparse
import importlib
import math
import select
import signal
import socket
import struct
import sys
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

HEADER = struct.pack(">4sII", b"RTL0", 0, 0)
"""Tuner unknown, no list of gain steps."""
COMMAND = struct.Struct(">BI")
CENTRE, RATE, GAIN_MODE, GAIN, PPM, DIGITAL_GAIN = 1, 2, 3, 4, 5, 8
NEEDED = frozenset((CENTRE, RATE, GAIN_MODE, GAIN))
"""No sample is sent before the client has said these."""
SETTINGS_S, SEND_S = 5.0, 2.0
SEND_BUFFER = 1 << 20
"""Bytes that may wait for the client."""
READ_US, READS_WITHOUT = 250_000, 8
"""After 2 s of reads without a sample the device is given up."""
BLOCK_SAMPLES = 65_536
RATE_OFF, CENTRE_OFF_HZ, GAIN_OFF_DB = 100e-6, 1000.0, 0.5
"""How far from what was asked the device may be (our choice)."""
ERRORS = {-2: "stream error", -3: "corrupt samples", -5: "not supported", -6: "time error"}
TIMEOUT, OVERFLOW, END_ABRUPT = -1, -4, 8
CODES = {"CU8": "u1", "CS8": "i1", "CS16": "i2", "CF32": "f4"}


class RefusedError(Exception):
    """This connection is closed for the reason given; another may come."""


class LostError(Exception):
    """The device cannot be used; the bridge ends."""


@dataclass(frozen=True, slots=True)
class Format:
    """How the device's samples come. full_scale: the component of a full converter.

    digital_gain_db: fixed, before the samples become 8 bits. LostError where it cannot be done.
    """

    name: str
    full_scale: float
    digital_gain_db: float = 0.0

    def __post_init__(self) -> None:
        eight = {"CU8": (127.5, 128.0, 255.0), "CS8": (127.0, 128.0)}.get(self.name)
        if eight and (self.digital_gain_db or self.full_scale not in eight):
            raise LostError(f"{self.name}: only full scale {eight} and no digital gain are known")
        if not 0.0 < self.full_scale < math.inf or not abs(self.digital_gain_db) < 100.0:
            raise LostError("--full-scale must be above 0, --digital-gain-db below 100")

    def cu8(self, raw: NDArray[Any]) -> bytes:
        """Components as the wire has them: full scale at 0 and 255, a device's rail always there.

        8 bits are passed on code for code. RefusedError where a component is not a number.
        """
        if self.name == "CU8":
            return raw.tobytes()
        if self.name == "CS8":
            return (raw.view(np.uint8) ^ np.uint8(0x80)).tobytes()
        full = self.full_scale
        if self.name == "CF32":  # an 8-bit converter may be behind it, which reaches 127 of 128
            low, high = -full * 127 / 128, full * 127 / 128
        else:
            low, high = -full, full - 1 if math.log2(full).is_integer() else full
        if not math.isfinite(float(raw.min()) + float(raw.max())):
            raise RefusedError("the device sends values that are not numbers")
        scale = 10.0 ** (self.digital_gain_db / 20.0) / self.full_scale
        values = raw * np.float32(127.5 * scale)
        values += np.float32(127.5)
        np.rint(values, out=values)
        codes = np.clip(values, 0.0, 255.0, out=values).astype(np.uint8)
        codes[raw >= high] = 255
        codes[raw <= low] = 0
        return codes.tobytes()


class Source:
    """One receiving channel of a device. soapy: the binding's module; device: what it made."""

    def __init__(self, soapy: Any, device: Any, channel: int, form: Format) -> None:
        self._rx, self._device, self._channel = soapy.SOAPY_SDR_RX, device, channel
        self._form = form
        self._stream: Any = None
        self._buffer: NDArray[Any] = np.empty(2 * BLOCK_SAMPLES, CODES[form.name])

    def apply(self, code: int, value: int) -> None:
        """One command of the wire; RefusedError where the device does not do as it is told."""
        device, where = self._device, (self._rx, self._channel)
        if code in (GAIN_MODE, DIGITAL_GAIN) and value != (code == GAIN_MODE):
            raise RefusedError("automatic gain: under it a level means nothing; give a fixed gain")
        if code == CENTRE:
            device.setFrequency(*where, float(value))
            _near("centre", device.getFrequency(*where), value, CENTRE_OFF_HZ, "Hz")
        elif code == RATE:
            if self._stream is not None:
                raise RefusedError("another rate takes another connection")
            device.setSampleRate(*where, float(value))
            _near("rate", device.getSampleRate(*where), value, RATE_OFF * value, "samples/s")
        elif code == GAIN_MODE and device.hasGainMode(*where):
            device.setGainMode(*where, False)
            if device.getGainMode(*where):
                raise RefusedError("the device stays at automatic gain")
        elif code == GAIN:
            gain_db = _signed(value) / 10.0
            device.setGain(*where, gain_db)
            _near("gain", device.getGain(*where), gain_db, GAIN_OFF_DB, "dB")
        elif code == PPM and _signed(value):
            if not device.hasFrequencyCorrection(*where):
                raise RefusedError("the device takes no frequency correction; set ppm = 0")
            device.setFrequencyCorrection(*where, float(_signed(value)))

    def start(self) -> None:
        """Begin to receive; LostError where the device does not."""
        self._stream = self._device.setupStream(self._rx, self._form.name, [self._channel])
        if code := self._device.activateStream(self._stream):
            raise LostError(f"the device does not begin to receive ({ERRORS.get(code, code)})")

    def read(self) -> bytes:
        """Samples as the wire has them; RefusedError where some are lost, LostError without any."""
        for _ in range(READS_WITHOUT):
            where = (self._stream, [self._buffer], BLOCK_SAMPLES)
            got = self._device.readStream(*where, timeoutUs=READ_US)
            if got.ret == OVERFLOW or (got.ret >= 0 and got.flags & END_ABRUPT):
                raise RefusedError("overflow, samples are lost")
            if got.ret < 0 and got.ret != TIMEOUT:
                raise LostError(f"the device fails: {ERRORS.get(got.ret, got.ret)}")
            if got.ret > 0:
                return self._form.cu8(self._buffer[: 2 * got.ret])
        raise LostError(f"no sample for {READS_WITHOUT * READ_US / 1e6:g} s")

    def stop(self) -> None:
        """Receive no more."""
        stream, self._stream = self._stream, None
        if stream is not None:
            self._device.deactivateStream(stream)
            self._device.closeStream(stream)


def _near(what: str, there: float, asked: float, off: float, unit: str) -> None:
    if not abs(there - asked) <= off:
        raise RefusedError(
            f"{what} {asked:.12g} {unit}: the device takes {there:.12g}; ask for that"
        )


def _signed(value: int) -> int:
    return value - (1 << 32) if value >= 1 << 31 else value


class Client:
    """A connection and the commands that came with it."""

    def __init__(self, link: socket.socket, source: Source) -> None:
        self._link, self._source = link, source
        self._rest = b""
        self._told: set[int] = set()

    def serve(self) -> None:
        """Until it goes; RefusedError says why it is to be sent away."""
        self._link.setsockopt(socket.SOL_SOCKET, socket.SO_SNDBUF, SEND_BUFFER)
        self._link.settimeout(SEND_S)
        try:
            self._link.sendall(HEADER)
            while not self._told >= NEEDED:
                self._commands(SETTINGS_S)
            self._source.start()
            while True:
                samples = self._source.read()
                self._commands(0.0)
                self._link.sendall(samples)
        except TimeoutError:
            raise RefusedError(f"the client reads nothing for {SEND_S:g} s") from None
        except OSError as error:
            raise RefusedError(error.strerror or str(error)) from None

    def _commands(self, wait_s: float) -> None:
        """Do what has come; wait for something so long."""
        if not select.select([self._link], [], [], wait_s)[0]:
            if not wait_s:
                return
            raise RefusedError(f"no rate, gain mode, gain and centre within {wait_s:g} s each")
        data = self._link.recv(4096)
        if not data:
            raise RefusedError("the client has gone")
        self._rest += data
        while len(self._rest) >= COMMAND.size:
            code, value = COMMAND.unpack_from(self._rest)
            self._rest = self._rest[COMMAND.size :]
            try:
                self._source.apply(code, value)
            except RuntimeError as error:  # so the binding passes on what a driver refuses
                raise RefusedError(f"command {code}, {value}: {error}") from None
            self._told.add(code)


def serve(source: Source, listener: socket.socket, say: Callable[[str], None]) -> None:
    """One client after the other, for ever; LostError where the device cannot be used any more."""
    while True:
        link, _ = listener.accept()
        with link:
            try:
                Client(link, source).serve()
            except RefusedError as reason:
                say(f"connection closed: {reason}")
            finally:
                source.stop()


def opened(soapy: Any, options: argparse.Namespace) -> Source:
    """The device of the options, ready; LostError with what to do about it."""
    try:
        device = soapy.Device(options.device)
    except RuntimeError as error:
        raise LostError(f"{options.device!r}: {error}; see SoapySDRUtil --find") from None
    rx, channel = soapy.SOAPY_SDR_RX, options.channel
    if not 0 <= channel < (count := device.getNumChannels(rx)):
        raise LostError(f"{options.device!r} has {count} receiving channels, not number {channel}")
    form = _format(device, rx, options)
    if options.antenna:
        device.setAntenna(rx, channel, options.antenna)
    return Source(soapy, device, channel, form)


def _format(device: Any, rx: int, options: argparse.Namespace) -> Format:
    """The options' format, or else the device's own with the full scale that it tells."""
    name, full_scale = options.format, options.full_scale
    if (name is None) != (full_scale is None):
        raise LostError("give --format and --full-scale together, or neither")
    if name is None:
        give = ", ".join(device.getStreamFormats(rx, options.channel))
        give = f"give --format (of {give}) and --full-scale, the component of a full converter"
        try:
            name, full_scale = device.getNativeStreamFormat(rx, options.channel)
        except TypeError:  # some builds of the binding want a C++ reference there
            raise LostError(f"this binding cannot tell the device's full scale; {give}") from None
        if name not in CODES:
            raise LostError(f"the device's own format is {name}; {give}")
    return Format(name, float(full_scale), options.digital_gain_db)


def _parsed(words: Sequence[str] | None) -> argparse.Namespace:
    parser = argparse.ArgumentParser(description="A SoapySDR receiver on the wire of IQ.md.")
    parser.add_argument("--device", required=True, help="as SoapySDR writes it: driver=...")
    parser.add_argument("--port", type=int, default=1234, help="on 127.0.0.1 (default 1234)")
    parser.add_argument("--channel", type=int, default=0, help="receiving channel (default 0)")
    parser.add_argument("--antenna", help="name of the device's input")
    parser.add_argument("--format", choices=sorted(CODES), help="else the device's own")
    parser.add_argument("--full-scale", type=float, help="component of a full converter")
    parser.add_argument("--digital-gain-db", type=float, default=0.0, help="before the 8 bits")
    return parser.parse_args(words)


def _say(line: object) -> None:
    sys.stderr.write(f"soapy_bridge: {line}\n")


def main(words: Sequence[str] | None = None) -> int:
    """The program; 3 where the device cannot be used."""
    options = _parsed(words)
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    try:
        soapy = importlib.import_module("SoapySDR")
    except ImportError as error:
        _say(f"{error}; install python3-soapysdr and run this with /usr/bin/python3")
        return 3
    try:
        source = opened(soapy, options)
        with socket.create_server(("127.0.0.1", options.port), backlog=1) as listener:
            _say(f"listens at 127.0.0.1:{listener.getsockname()[1]}")
            serve(source, listener, _say)
    except OSError as error:
        _say(f"port {options.port}: {error.strerror}; choose another --port")
    except (LostError, RuntimeError) as reason:  # the binding raises nothing narrower
        _say(reason)
    except KeyboardInterrupt:
        return 0
    return 3


if __name__ == "__main__":
    sys.exit(main())
