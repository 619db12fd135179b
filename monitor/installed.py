"""What the site file says really hangs at the place: [[installed]], by type, serial and axis."""

from __future__ import annotations

from dataclasses import dataclass

from monitor.tomlfile import TopTable

AXES = ("x", "y", "z", "")


@dataclass(frozen=True, slots=True)
class Installed:
    """A part of the chain as it is in place; axis '': it serves every axis."""

    kind: str
    serial: str
    axis: str

    @property
    def name(self) -> str:
        """Kind and axis, for messages."""
        return f"{self.kind} of axis {self.axis}" if self.axis else self.kind


def read_installed(top: TopTable) -> tuple[Installed, ...]:
    """The [[installed]] tables of a site file; ConfigError of one line."""
    found: list[Installed] = []
    for table in top.tables("installed", []):
        part = Installed(
            table.text("type").strip(), table.text("serial").strip(), table.text("axis", "", AXES)
        )
        table.finish()
        for key, text in (("type", part.kind), ("serial", part.serial)):
            if not text:
                raise table.error(key, "is empty")
        if part in found:
            raise table.error("serial", f"{part.serial!r} stands there twice")
        found.append(part)
    return tuple(found)
