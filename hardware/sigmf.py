"""Which file holds the samples of a recording, and what its header says."""

from __future__ import annotations

import json
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


def find(path: Path, capture: int | None = None) -> tuple[Path, IqFormat | None]:
    """The file of samples and its format, for either file of a SigMF pair or a bare file.

    capture: number of a SigMF capture; None: all, if they join on. None comes back where neither a
    header nor the file's name tells the format. DeviceError where one of a pair is missing,
    ConfigError where its header cannot be used.
    """
    if path.suffix == ARCHIVE:
        raise ConfigError(f"{path}: an archive; unpack it first, tar -xf, and name what comes out")
    if path.suffix not in (META, DATA):
        name = datatype_by_extension(path.name)
        return path, None if name is None else IqFormat(name)
    meta, data = path.with_suffix(META), path.with_suffix(DATA)
    for one in (meta, data):
        if not one.is_file():
            raise DeviceError(f"sensor.file: {one} does not exist; a recording has both files")
    try:
        document = json.loads(meta.read_text(encoding="utf-8"))
    except ValueError as error:
        raise ConfigError(f"{meta}: not a JSON text ({error})") from None
    return data, format_from_sigmf(document, str(meta), capture)
