"""What waits to be committed: readings and rows since the last commit, in memory."""

from __future__ import annotations

from dataclasses import replace

from monitor.core.gather import Gathered, nothing, stack
from monitor.core.readings import Batch, joined
from monitor.core.rows import Event
from monitor.record.types import ClockFix, Commit

MOST_READINGS = 2_000_000
"""About two days of ten readings a second; beyond it the oldest readings are given up."""
MOST_TABLES = 40_000
"""Tables of rows: about six hours of ten a second in half-second steps; the same beyond it."""
WHY = "the record could not be written for too long"


class Spool:
    """Gathers the output of steps until a commit takes it."""

    def __init__(self) -> None:
        self._rows = nothing()
        self.clear()

    def add(self, batch: Batch, rows: Gathered) -> None:
        """A batch as it was judged, and what came of it."""
        if batch.n:
            self._raw.append(batch)
            self._readings += batch.n
        self._rows.extend(rows)

    def event(self, event: Event) -> None:
        """An event of the daemon's own."""
        self._rows.events.append(event)

    def fix(self, fix: ClockFix) -> None:
        """A clock fix."""
        self._fixes.append(fix)

    @property
    def empty(self) -> bool:
        """Whether there is nothing to write."""
        return not (self._raw or self._rows.blocks or self._rows.events or self._fixes)

    def add_rows(self, rows: Gathered) -> None:
        """Rows without readings: what a run before had not written yet."""
        self._rows.extend(rows)

    @property
    def minute(self) -> bool:
        """Whether a minute's windows are here: time to write rows."""
        return bool(self._rows.windows)

    def commit(self, temperature_c: float | None, calibration: str, with_rows: bool) -> Commit:
        """What is here as one commit; it stays here until clear().

        Blocks and windows go once a minute: they can be made again of the raw counts, and written
        each time they would wear the medium by a third more.
        """
        rows = self._rows if with_rows else nothing()
        events = sorted(self._rows.events, key=lambda event: event.boot_ns)
        return Commit(
            joined(self._raw) if self._raw else None,
            stack(rows.blocks),
            stack(rows.windows),
            stack(rows.fields),
            stack(rows.exposures),
            tuple(events),
            tuple(self._fixes),
            temperature_c,
            calibration,
        )

    def clear(self, with_rows: bool = True) -> None:
        """Forget what has been handed over."""
        kept = nothing() if with_rows else replace(self._rows, events=[])
        self._raw: list[Batch] = []
        self._rows = kept
        self._fixes: list[ClockFix] = []
        self._readings = 0

    def give_up(self, boot_ns: int) -> None:
        """While the record takes nothing: keep memory bounded, and say what was lost."""
        lost, rows = 0, self._rows
        if self._readings > MOST_READINGS:
            while self._raw and self._readings > MOST_READINGS // 2:
                gone = self._raw.pop(0)
                self._readings -= gone.n
                lost += gone.n
        shed = 0
        for tables in (rows.blocks, rows.windows, rows.fields, rows.exposures):
            if len(tables) > MOST_TABLES:
                shed += len(tables) // 2
                del tables[: len(tables) // 2]
        if lost or shed:
            body: dict[str, object] = {"readings": lost, "tables": shed, "why": WHY}
            self.event(Event(boot_ns, "fault", "given up", body))
