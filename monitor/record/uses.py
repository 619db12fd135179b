"""Which documents the figures of a record rest on, from each start of the program on."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Mapping
from dataclasses import dataclass

_STARTS = "SELECT boot, boot_ns, body FROM events WHERE kind = 'start' ORDER BY event"


@dataclass(frozen=True, slots=True)
class Use:
    """From boot_ns of a boot on, until its next use; hashes: SHA-256 of each document by name."""

    boot: int
    boot_ns: int
    hashes: Mapping[str, str]

    @property
    def calibration(self) -> str:
        """SHA-256 of the calibration file; '' where the start does not name it."""
        return self.hashes.get("calibration", "")


def uses(db: sqlite3.Connection) -> list[Use]:
    """Every start of the program, the first one first."""
    return [
        Use(boot, boot_ns, {str(name): str(value) for name, value in json.loads(body).items()})
        for boot, boot_ns, body in db.execute(_STARTS)
    ]
