"""fieldsill iq: raw band powers of a recorded file of complex samples."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from pathlib import Path

import click

from monitor import iqfile
from monitor.cli.output import print_json
from monitor.core.bandpower import BandFigures, Engine
from monitor.core.errors import ConfigError
from monitor.core.limits import frequency_text
from monitor.core.quantities import frequency_hz, split_unit
from monitor.core.sigmf import IqFormat
from monitor.core.spectrum import (
    BandAccumulator,
    BandPowers,
    bytes_per_sample,
    clipped_components,
    datatype_of,
    samples_from_bytes,
)

RAW = (
    "raw figures relative to full scale: no mean, DC or quantisation correction; without a"
    " calibration and a fixed gain they say nothing about a field strength"
)
CORRECTED = (
    "corrected: the offset and the converter's rounding noise taken off, three bins to each side of"
    " the centre left out and made good from the rest of the band"
)
SPIKE_BINS = 3


@dataclass(frozen=True, slots=True)
class Measured:
    """What was found in a file. clipped: share of components at a rail; None without a rail.

    corrected: None unless asked for.
    """

    powers: BandPowers
    corrected: BandFigures | None
    clipped: float | None
    half_sample: bool


@click.command("iq")
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--datatype", help="cu8, cs8, cs16 or cf32; else from SigMF or the extension.")
@click.option("--rate", help="Complex samples a second, for example 2.4MHz.")
@click.option("--centre", help="Centre frequency, for example 1.8GHz.")
@click.option("--band", "bands", multiple=True, help="LOW:HIGH in Hz from the centre.")
@click.option("--fft", default=1024, show_default=True, help="Samples in a segment.")
@click.option(
    "--overlap", default=0.5, show_default=True, help="Overlap of segments, 0 to below 1."
)
@click.option("--capture", type=int, help="Number of a SigMF capture, from 0; else all.")
@click.option("--header-bytes", type=click.IntRange(0), help="To skip before the samples.")
@click.option("--corrected", is_flag=True, help="Also band powers as the live engine finds them.")
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def command(
    file: Path,
    datatype: str | None,
    rate: str | None,
    centre: str | None,
    bands: tuple[str, ...],
    fft: int,
    overlap: float,
    capture: int | None,
    header_bytes: int | None,
    corrected: bool,
    as_json: bool,
) -> None:
    """Total and band powers of recorded I/Q, in dBFS; the peak is that of the strongest segment."""
    path, form = iqfile.open_format(file, datatype, capture, header_bytes)
    rate_hz = frequency_hz(rate) if rate else form.rate_hz
    centre_hz = frequency_hz(centre) if centre else form.centre_hz
    spans = [_band(text) for text in bands]
    if spans and rate_hz is None:
        raise ConfigError(f"{path}: the sampling rate is not known; give --rate, e.g. 2.4MHz")
    # Without bands the rate only sets the scale of an axis that nobody asks for.
    accumulator = BandAccumulator(rate_hz or 1.0, spans, fft, overlap)
    engine = _engine(form, rate_hz, spans, fft) if corrected else None
    measured = _measure(path, form, accumulator, engine)
    _check(path, measured, bool(spans), fft)
    document = _document(measured, spans, rate_hz, centre_hz, form)
    if as_json:
        print_json(document)
    else:
        _print(path, document)


def _band(text: str) -> tuple[float, float]:
    low, colon, high = text.partition(":")
    if not colon:
        raise ConfigError(f"band {text!r}: write LOW:HIGH, for example -500kHz:500kHz")
    return _offset_hz(low), _offset_hz(high)


def _offset_hz(text: str) -> float:
    value, unit = split_unit(text)
    return math.copysign(frequency_hz(f"{abs(value)}{unit}"), value) if value else 0.0


def _engine(
    form: IqFormat, rate_hz: float | None, spans: list[tuple[float, float]], fft: int
) -> Engine:
    if rate_hz is None or not spans:
        raise ConfigError("--corrected: give --band, and --rate where the file does not tell it")
    spike_hz = SPIKE_BINS * rate_hz / fft
    return Engine(rate_hz, spans, datatype=form.datatype, fft=fft, excluded_hz=spike_hz)


def _measure(
    path: Path, form: IqFormat, accumulator: BandAccumulator, engine: Engine | None
) -> Measured:
    clipped = components = left = 0
    width = bytes_per_sample(form.datatype)
    for piece in iqfile.pieces(path, form):
        hits, total = clipped_components(piece, form.datatype)
        clipped, components, left = clipped + hits, components + total, len(piece) % width
        accumulator.add(samples_from_bytes(piece, form.datatype))
        if engine is not None:
            engine.add(piece)
    rails = datatype_of(form.datatype).rails
    share = clipped / components if rails is not None and components else None
    found = engine.result() if engine else None
    return Measured(_scaled(accumulator.result(), form.scale), found, share, left > 0)


def _scaled(powers: BandPowers, scale: float) -> BandPowers:
    square = scale**2
    return replace(
        powers,
        power=powers.power * square,
        peak=powers.peak * square,
        total_power=powers.total_power * square,
    )


def _check(path: Path, measured: Measured, with_bands: bool, fft: int) -> None:
    powers = measured.powers
    if powers.samples == 0:
        raise ConfigError(f"{path}: holds no sample")
    if not math.isfinite(powers.total_power):
        raise ConfigError(f"{path}: holds values that are not numbers; is the datatype right?")
    if with_bands and powers.segments == 0:
        raise ConfigError(
            f"{path}: {powers.samples} samples are less than one segment; give a smaller --fft"
        )


def _dbfs(power: float) -> float:
    return 10.0 * math.log10(power) if power > 0.0 else -math.inf


def _document(
    measured: Measured,
    spans: list[tuple[float, float]],
    rate_hz: float | None,
    centre_hz: float | None,
    form: IqFormat,
) -> dict[str, object]:
    powers = measured.powers
    bands: list[dict[str, float]] = [
        {
            "low_hz": low,
            "high_hz": high,
            "power_dbfs": _dbfs(float(power)),
            "peak_dbfs": _dbfs(float(peak)),
        }
        for (low, high), power, peak in zip(spans, powers.power, powers.peak)
    ]
    if measured.corrected is not None:
        figures = measured.corrected
        for band, power, share in zip(bands, figures.power, figures.usable_share):
            band["corrected_dbfs"] = _dbfs(float(power) * form.scale**2)
            band["usable_share"] = float(share)
    return {
        "bands": bands,
        "total_power_dbfs": _dbfs(powers.total_power),
        "clipped_fraction": measured.clipped,
        "samples": powers.samples,
        "simulated": form.simulated,
        "duration_s": powers.samples / rate_hz if rate_hz else None,
        "segments": powers.segments,
        "datatype": form.datatype,
        "rate_hz": rate_hz,
        "centre_hz": centre_hz,
        "notes": _notes(measured, form),
    }


def _notes(measured: Measured, form: IqFormat) -> list[str]:
    notes = [RAW]
    if measured.corrected is not None:
        notes.append(CORRECTED)
    if form.scale != 1.0:
        notes.append(f"stored values were multiplied by {form.scale:g}, as the metadata say")
    if measured.clipped:
        notes.append(
            f"the converter was at its rails in {measured.clipped:.3g} of all components: every"
            " figure is a lower bound"
        )
    if measured.clipped is None:
        notes.append("floating point has no full scale of its own: clipping cannot be seen")
    if measured.half_sample:
        notes.append("part of a sample at the end of the file was left out")
    return notes


def _print(path: Path, document: dict[str, object]) -> None:
    duration, centre = document["duration_s"], document["centre_hz"]
    if document["simulated"]:
        click.echo("SIMULATED: these figures are invented")
    length = "length unknown" if duration is None else f"{duration:.6g} s"
    click.echo(f"{path}: {document['datatype']}, {document['samples']} samples, {length}")
    if centre is not None:
        click.echo(f"centre {frequency_text(float(centre))}")  # type: ignore[arg-type]
    click.echo(f"total power  {_level(document['total_power_dbfs'])} dBFS")
    clipped = document["clipped_fraction"]
    click.echo(f"clipped      {'cannot be seen' if clipped is None else f'{clipped:.3%}'}")
    bands: list[dict[str, float]] = document["bands"]  # type: ignore[assignment]
    if bands:
        heads = f"{'from, Hz':>14} {'below, Hz':>14} {'mean, dBFS':>12} {'peak, dBFS':>12}"
        click.echo(heads + (f" {'corrected':>12}" if "corrected_dbfs" in bands[0] else ""))
    for band in bands:
        more = f" {_level(band['corrected_dbfs']):>12}" if "corrected_dbfs" in band else ""
        click.echo(
            f"{band['low_hz']:>14,.0f} {band['high_hz']:>14,.0f}"
            f" {_level(band['power_dbfs']):>12} {_level(band['peak_dbfs']):>12}{more}"
        )
    for note in document["notes"]:  # type: ignore[attr-defined]
        click.echo(f"Note: {note}")


def _level(dbfs: object) -> str:
    value = float(dbfs)  # type: ignore[arg-type]
    return f"{value:.3f}" if math.isfinite(value) else "nothing"
