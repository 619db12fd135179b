"""Options of [sensor] for a receiver on the network, read and checked."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import ClassVar

from hardware.iq_client import Radio, check_server
from hardware.iq_count import RATES_HZ, trial_s
from hardware.iq_keep import recording_bytes
from hardware.iq_levels import COUNTS_PER_DB, Levels, spike_hz
from hardware.iq_plan import Tune, fixed_tune, tunes
from hardware.iq_receiver import Scheme
from hardware.thermometer import tenths_of
from monitor.core.averaging_law import Averaging
from monitor.core.errors import ConfigError, DeviceError
from monitor.core.keys import Table
from monitor.core.readings import MISSING, FrontEnd

PORT = 1234
INTERVAL_S = 0.1
DWELL_S = 0.2
SETTLE_S = 0.25
"""Our choice: four buffers of 64 ms (IQ.md) may be under way when the receiver is tuned anew."""
EVIDENCE_MB = 64.0
PROCESS_S = 2.0
"""Our choice: a small machine loads numpy within it, and the server sends its header."""
LEAST_CHECK_H = 0.05
SPAN_SHARE = 0.8
"""Share of the rate that can be used (IQ.md: 75 to 80 %)."""
AUTOMATIC = (
    "automatic gain is refused: a level means nothing under it. A real recording wandered by 1.9 dB"
    " within one second, at a fixed gain the same carrier held to 0.16 dB; give a number of dB"
)


@dataclass(frozen=True, slots=True)
class Settings:
    """Options of [sensor] for a receiver on the network. bands: (low, high) in Hz per channel.

    seed: of the random starts; None takes the system's. thermometer: the file that tells the
    receiver's temperature, None where nothing does. evidence_bytes: for recordings, 0 for none.
    """

    radio: Radio
    scheme: Scheme
    bands: tuple[tuple[float, float], ...]
    seed: int | None = None
    thermometer: Path | None = None
    evidence_bytes: int = 0
    resolution: ClassVar[float | None] = 1.0 / COUNTS_PER_DB

    @property
    def bands_hz(self) -> tuple[tuple[float, float], ...]:
        """(low, high) on the air per channel, Hz."""
        return self.bands

    @property
    def gain_db(self) -> float:
        """The gain that is set, dB: the calibration must be of that step."""
        return self.radio.gain_db

    @property
    def bin_hz(self) -> float:
        """Spacing of the spectrum's bins."""
        return self.radio.rate_hz / self.scheme.fft

    @property
    def round_s(self) -> float:
        """The longest time from one reading of a band to the next."""
        return self.scheme.round_s

    @property
    def first_s(self) -> float:
        """How long the first reading may take: a process starts, a rate is proved, a round."""
        return PROCESS_S + trial_s(self.radio.rate_hz) + self.scheme.settle_s + self.round_s

    @property
    def averaging(self) -> Averaging:
        """A reading is the mean power of its interval or dwell."""
        return Averaging("power", self.scheme.reading_s, sparse=self.scheme.swept)

    def without(self, spurs_hz: Sequence[tuple[float, float]]) -> Settings:
        """The same, lines from low to high (Hz on the air) that the receiver makes left out.

        ConfigError where that leaves nothing of a band.
        """
        places = []
        for place in self.scheme.tunes:
            at_hz = place.centre_hz
            spurs = tuple((low - at_hz, high - at_hz) for low, high in spurs_hz)
            Levels(self.radio.rate_hz, place.bands, self.scheme.fft, spurs)
            places.append(replace(place, spurs=spurs))
        return replace(self, scheme=replace(self.scheme, tunes=tuple(places)))

    def check_device(self) -> None:
        """DeviceError where no server answers, or the thermometer cannot be read."""
        if self.thermometer is not None and tenths_of(self.thermometer) == MISSING:
            raise DeviceError(
                f"sensor.temperature_file: {self.thermometer} holds no thousandths of a degree; "
                "correct the path, or take it out"
            )
        check_server(self.radio.host, self.radio.port, "sensor.host")

    def open(
        self,
        channels: int,
        boot_ns: Callable[[], int],
        utc_ns: Callable[[], int],
        simulated: bool,
    ) -> FrontEnd:
        """The front end, its process started; ConfigError unless there is a band per channel."""
        from hardware.iq_stream import IqStream

        if len(self.bands) != channels:
            raise ConfigError(f"sensor.bands: {len(self.bands)} bands for {channels} channels")
        return IqStream(self, boot_ns, simulated)


def settings_from(table: Table) -> Settings:
    """Settings from the options; ConfigError about each wrong key. No server is asked."""
    host = _host(table)
    port = table.whole("port", PORT, 1, 65_535)
    rate_hz = _rate(table)
    radio = Radio(host, port, rate_hz, _gain(table), table.whole("ppm", 0, -1000, 1000))
    bands = _bands(table)
    fft = table.whole("fft", 1024, 32, 1 << 20)
    if fft % 2:
        raise table.error("fft", f"{fft} is odd; a power of two is quickest")
    span_hz = table.number("span", SPAN_SHARE, 0.1, 1.0) * rate_hz
    centre_hz = table.number("centre_hz", None, 1.0, 2.0**32 - 1.0)
    places = _places(table, bands, rate_hz, fft, span_hz, centre_hz)
    least_s = 2 * fft / rate_hz
    check_h, check_db = _check(table, radio.gain_db)
    scheme = Scheme(
        channels=len(bands),
        tunes=places,
        fft=fft,
        interval_s=_whole(table.number("interval_s", INTERVAL_S, least_s, 3600.0), fft / rate_hz),
        dwell_s=_whole(table.number("dwell_s", DWELL_S, least_s, 3600.0), fft / rate_hz),
        settle_s=table.number("settle_s", SETTLE_S, 0.1, 60.0),
        check_h=check_h,
        check_db=check_db,
    )
    return Settings(
        radio,
        scheme,
        bands,
        thermometer=_thermometer(table),
        evidence_bytes=_evidence(table, rate_hz),
    )


def _host(table: Table) -> str:
    """A name or address that the system can be asked about; it is told in the code of names."""
    host = table.text("host")
    if not host.strip():
        raise table.error("host", "is empty; name the machine that the receiver is plugged into")
    try:
        host.encode("idna")
    except UnicodeError:
        raise table.error("host", f"{host!r} is no name of a machine; correct it") from None
    return host


def _thermometer(table: Table) -> Path | None:
    name = table.text("temperature_file", "")
    if name and not Path(name).is_absolute():
        raise table.error("temperature_file", f"{name!r} is no absolute path; begin it with /")
    return Path(name) if name else None


def _evidence(table: Table, rate_hz: int) -> int:
    """Bytes that recordings may take; a budget that not even one fits in is a mistake."""
    budget = round(table.number("evidence_mb", EVIDENCE_MB, 0.0, 1e6) * 1e6)
    least = recording_bytes(rate_hz)
    if 0 < budget < least:
        raise table.error(
            "evidence_mb",
            f"{budget / 1e6:g} holds no recording, which has {least / 1e6:.3g} MB; 0 keeps none",
        )
    return budget


def _places(
    table: Table,
    bands: tuple[tuple[float, float], ...],
    rate_hz: int,
    fft: int,
    span_hz: float,
    centre_hz: float | None,
) -> tuple[Tune, ...]:
    try:
        if centre_hz is None:
            places = tunes(bands, span_hz, spike_hz(rate_hz, fft))
        else:
            places = fixed_tune(bands, round(centre_hz), span_hz)
    except ConfigError as error:
        raise table.error("centre_hz", str(error)) from None
    for place in places:
        try:
            Levels(rate_hz, place.bands, fft)
        except ConfigError as error:
            raise table.error("fft", f"round {place.centre_hz} Hz: {error}") from None
    return places


def _whole(seconds: float, segment_s: float) -> float:
    """In whole halves of a segment: such stretches weigh all their samples exactly alike."""
    return round(seconds / segment_s * 2.0) * segment_s / 2.0


def _rate(table: Table) -> int:
    value = table.number("rate_hz")
    if value != round(value) or not any(low <= value <= high for low, high in RATES_HZ):
        ranges = " or ".join(f"{low} to {high}" for low, high in RATES_HZ)
        raise table.error(
            "rate_hz", f"{value:.12g} is refused by receivers; a whole number from {ranges}"
        )
    return round(value)


def _gain(table: Table) -> float:
    """A fixed gain in dB; ConfigError with the reason where it is to be automatic."""
    if isinstance(table.any("gain_db"), str):
        raise table.error("gain_db", AUTOMATIC)
    if table.any("automatic_gain", False) is not False:
        raise table.error("automatic_gain", AUTOMATIC)
    return _tenths(table, "gain_db")


def _tenths(table: Table, key: str) -> float:
    gain_db = table.number(key, low=-30.0, high=100.0)
    if abs(gain_db * 10 - round(gain_db * 10)) > 1e-6:
        raise table.error(key, f"{gain_db:g} is finer than a tenth of a dB")
    return gain_db


def _check(table: Table, gain_db: float) -> tuple[float, float]:
    """Hours between checks of the gain, 0 for none, and the gain that is stepped to."""
    every_h = table.number("gain_check_h", 0.0, 0.0, 8784.0)
    if not every_h:
        table.any("gain_check_db", None)
        return 0.0, gain_db
    if every_h < LEAST_CHECK_H:
        raise table.error("gain_check_h", f"{every_h:g} is below {LEAST_CHECK_H:g}; 0 is never")
    other_db = _tenths(table, "gain_check_db")
    if not 3.0 <= abs(other_db - gain_db) <= 20.0:
        raise table.error(
            "gain_check_db", f"{other_db:g} must be 3 to 20 dB below or above gain_db, {gain_db:g}"
        )
    return every_h, other_db


def _bands(table: Table) -> tuple[tuple[float, float], ...]:
    value = table.any("bands")
    if not isinstance(value, (list, tuple)) or not value:
        raise table.error("bands", "must be a list of [low, high] in Hz, one for each channel")
    for pair in value:
        good = isinstance(pair, (list, tuple)) and len(pair) == 2
        if not good or not all(type(edge) in (int, float) for edge in pair):
            raise table.error("bands", f"{pair!r} is not [low, high] in Hz")
        if not 0.0 < pair[0] < pair[1] < 2.0**32:
            raise table.error("bands", f"{pair!r}: above 0 and rising, below 4.29 GHz")
    return tuple((float(low), float(high)) for low, high in value)
