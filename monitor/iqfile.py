"""Files of complex samples: which format they are in, and their bytes in pieces."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

from monitor.core.errors import ConfigError, DeviceError
from monitor.core.sigmf import (
    ARCHIVE,
    DATA,
    META,
    IqFormat,
    datatype_by_extension,
    format_from_sigmf,
)
from monitor.core.spectrum import bytes_per_sample

CHUNK_SAMPLES = 1 << 18


def open_format(
    path: Path, datatype: str | None, capture: int | None = None, header_bytes: int | None = None
) -> tuple[Path, IqFormat]:
    """The file of samples and its format: SigMF metadata beside it, the extension, or datatype.

    A datatype given goes before the others. capture: number of a SigMF capture. header_bytes: to
    skip in a file without metadata. ConfigError where no format is known; DeviceError where a file
    is missing.
    """
    if path.suffix == ARCHIVE:
        raise ConfigError(f"{path}: an archive; unpack it first, tar -xf, and name what comes out")
    meta = path.with_suffix(META) if path.suffix in (META, DATA) else Path(f"{path}{META}")
    data = path.with_suffix(DATA) if path.suffix == META else path
    if not data.is_file():
        raise DeviceError(f"{data}: no such file")
    if meta.is_file():
        if header_bytes is not None:
            raise ConfigError(
                f"{meta}: says itself how many bytes to skip; leave --header-bytes out"
            )
        found = _read_meta(meta, capture)
        if datatype:
            found = replace(found, datatype=datatype)
        return data, found
    if capture is not None:
        raise ConfigError(f"{data}: has no metadata with captures; leave --capture out")
    name = datatype or datatype_by_extension(data.name)
    if name is None:
        raise ConfigError(
            f"{data}: the name does not tell the datatype; give --datatype cu8, cs8, cs16 or cf32"
        )
    return data, IqFormat(name, header_bytes=header_bytes or 0)


def _read_meta(meta: Path, capture: int | None) -> IqFormat:
    try:
        document = json.loads(meta.read_text("utf-8"))
    except OSError as error:
        raise DeviceError(f"{meta}: {error.strerror}") from error
    except ValueError as error:
        raise ConfigError(f"{meta}: not a JSON text: {error}") from error
    return format_from_sigmf(document, str(meta), capture)


def pieces(path: Path, form: IqFormat) -> Iterator[bytes]:
    """The bytes of the samples, whole samples in every piece but perhaps the last."""
    size = CHUNK_SAMPLES * bytes_per_sample(form.datatype)
    try:
        with path.open("rb") as file:
            first, end = form.span(path.stat().st_size)
            left = end - first
            file.seek(first)
            while left > 0 and (piece := file.read(min(size, left))):
                left -= len(piece)
                yield piece
    except OSError as error:
        raise DeviceError(f"{path}: {error.strerror}") from error
