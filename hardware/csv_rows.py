"""Rows of a CSV file with a header, plain or gzipped, read in pieces and from the start again."""

from __future__ import annotations

import csv
import gzip
from collections.abc import Iterator
from itertools import islice
from pathlib import Path
from typing import TextIO

from monitor.core.errors import DeviceError


class CsvRows:
    """names: the header's, stripped. problem: why the file could not be read to its end, or ""."""

    def __init__(self, path: Path, separator: str) -> None:
        """DeviceError where the file cannot be opened."""
        self._path = path
        self._separator = separator
        self._file = _opened(path)
        self.names: list[str] = []
        self.rewind()

    def rewind(self) -> None:
        """Begin again after the header."""
        self.problem = ""
        self._file.seek(0)
        self._rows = csv.reader(self._file, delimiter=self._separator)
        header = next(self.pieces(1), [[]])[0]
        self.names = [name.strip().lstrip("\ufeff") for name in header]

    def pieces(self, size: int) -> Iterator[list[list[str]]]:
        """The next rows, size at a time; a file that breaks off ends there, with a problem."""
        while True:
            rows: list[list[str]] = []
            try:
                rows.extend(islice(self._rows, size))
            except (OSError, EOFError, UnicodeDecodeError, csv.Error) as error:
                self.problem = f"{self._path} cannot be read further ({error})"
            if rows:
                yield rows
            if self.problem or len(rows) < size:
                return

    def close(self) -> None:
        """Let the file go."""
        self._file.close()


def _opened(path: Path) -> TextIO:
    """The file as text, unpacked where its name ends in .gz; DeviceError where unreadable."""
    try:
        if path.suffix == ".gz":
            return gzip.open(path, "rt", encoding="utf-8", newline="")
        return path.open("r", encoding="utf-8", newline="")
    except OSError as error:
        raise DeviceError(
            f"sensor.file: {path} cannot be read ({error.strerror}); correct the path"
        ) from None
