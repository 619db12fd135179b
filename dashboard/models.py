"""What the pages know at the moment: from the daemon, else from the record, else nothing."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import datetime
from enum import StrEnum
from pathlib import Path
from typing import Any, Protocol

from dashboard import bounds, words
from dashboard.bounds import Ratio
from monitor.core.alarms import AlertRule
from monitor.core.errors import FieldsillError
from monitor.core.limits import Scope
from monitor.record.types import EventRow, History, Latest

Snapshot = Mapping[str, Any]
Ask = Callable[[Path, Mapping[str, object], float], Mapping[str, Any]]
ASK_TIMEOUT_S = 1.5
OWN_POPULATION = {"public": "general_public", "controlled": "occupational"}
"""The population whose limits are those of a place, by its occupancy."""
UNREACHABLE = (FieldsillError, OSError, ValueError)
"""What asking a daemon that is not there, hangs or answers nonsense can raise."""


class RecordLike(Protocol):
    """The read model of a record, as far as the pages use it."""

    @property
    def simulated(self) -> bool:
        """Whether its data are invented."""

    def latest(self) -> Latest | None:
        """The newest windows."""

    def scopes(self) -> Mapping[int, Scope]:
        """Every scope that was ever judged, by the record's number."""

    def history(
        self, start_utc_ns: int, end_utc_ns: int, averaging_s: int, at_most: int
    ) -> History:
        """Averages over a span."""

    def events(self, start_utc_ns: int, end_utc_ns: int, limit: int) -> Sequence[EventRow]:
        """What happened in a span."""

    def close(self) -> None:
        """Let the file go."""


@dataclass(frozen=True, slots=True)
class Station:
    """What the pages are told about the box at start; a running daemon says the same itself."""

    record_path: Path
    control_path: Path
    name: str = ""
    place: str = ""
    occupancy: str = "public"
    silence_after_s: float = 30.0
    alerts: tuple[AlertRule, ...] = ()


@dataclass(frozen=True, slots=True)
class Doors:
    """How the pages reach the daemon, the record and the time; tests put their own in."""

    ask: Ask
    open_record: Callable[[Path], RecordLike]
    utc_ns: Callable[[], int]


class State(StrEnum):
    """What the newest figures are worth."""

    MEASURING = "measuring"
    STARTING = "starting"
    SILENT = "silent"
    STOPPED = "stopped"
    NO_RECORD = "no_record"


@dataclass(frozen=True, slots=True)
class Live:
    """The moment as a page tells it. snapshot: only where the daemon answered.

    since: last valid reading that is known of; recorded: the last in the record; unheard_s: how
    long the daemon has not answered, None where it never did since the pages began.
    """

    state: State
    drawn: datetime
    simulated: bool
    snapshot: Snapshot = field(default_factory=dict)
    since: datetime | None = None
    age_s: float | None = None
    trouble: str = ""
    recorded: datetime | None = None
    unheard_s: float | None = None

    @property
    def current(self) -> bool:
        """Whether the figures of the snapshot describe the present."""
        return self.state is State.MEASURING

    @property
    def exposures(self) -> list[Snapshot]:
        """Exposure ratios of every scope; empty where nothing is measured."""
        return list(self.snapshot.get("exposures") or []) if self.current else []

    @property
    def fields(self) -> list[Snapshot]:
        """Averages of E; empty where nothing is measured."""
        return list(self.snapshot.get("fields") or []) if self.current else []

    @property
    def flags(self) -> list[str]:
        """The reservations that any of the figures carry."""
        return [str(flag) for flag in self.snapshot.get("flags") or []]

    def ratio(self, exposure: Snapshot) -> Ratio:
        """What is known of an exposure ratio."""
        return bounds.ratio(exposure, self.fields, self.flags)

    def rank(self, exposure: Snapshot) -> float:
        """The figure by which ratios are compared: a lower bound where no mean is known."""
        known = self.ratio(exposure)
        figures = (known.mean, known.low)
        return next((figure for figure in figures if figure is not None), -1.0)

    @property
    def levels(self) -> list[Snapshot]:
        """The alert levels."""
        return list(self.snapshot.get("levels") or [])

    @property
    def alarms(self) -> list[Snapshot]:
        """The alarms that are not in their normal state."""
        return [a for a in self.snapshot.get("alarms") or [] if a.get("state") != "normal"]


@dataclass(slots=True)
class Heard:
    """The daemon's last answer: when it came, and the last reading it knew of."""

    at: datetime | None = None
    since: datetime | None = None


def stands(snapshot: Snapshot, key: str) -> bool:
    """Whether an alarm is known to stand; a muted one is not known to."""
    states = ("unacknowledged", "acknowledged")
    return any(
        a.get("key") == key and a.get("state") in states for a in snapshot.get("alarms") or []
    )


def read_live(station: Station, doors: Doors, heard: Heard | None = None) -> Live:
    """Ask the daemon; where it does not answer, say since when there is no measurement.

    heard: what the last call knew, kept for the next.
    """
    heard = heard or Heard()
    drawn = words.utc_of(doors.utc_ns())
    try:
        answer = doors.ask(station.control_path, {"do": "now"}, ASK_TIMEOUT_S)
        snapshot = answer.get("now")
    except UNREACHABLE as error:
        return _from_record(station, doors, drawn, str(error), heard)
    if not isinstance(snapshot, Mapping):
        trouble = str(answer.get("error", "the daemon gave no figures"))
        return _from_record(station, doors, drawn, trouble, heard)
    age = snapshot.get("last_reading_age_s")
    since = words.parse_utc(snapshot.get("last_reading_utc"))
    heard.at, heard.since = drawn, since
    return Live(
        state=_state(snapshot, age, station.silence_after_s),
        drawn=drawn,
        simulated=bool(snapshot.get("simulated")),
        snapshot=snapshot,
        since=since,
        age_s=age,
    )


def _state(snapshot: Snapshot, age_s: float | None, silence_after_s: float) -> State:
    """age_s: of the last valid reading. The alarm counts as well as the age."""
    connected = (snapshot.get("device") or {}).get("connected", True)
    if stands(snapshot, "silence"):
        return State.SILENT
    if age_s is None:
        return State.STARTING
    if age_s > silence_after_s or (not connected and age_s > 5):
        return State.SILENT
    return State.MEASURING


def _from_record(
    station: Station, doors: Doors, drawn: datetime, trouble: str, heard: Heard
) -> Live:
    """The daemon does not answer: the record knows the last reading, and nothing of the present."""
    if not station.record_path.exists():
        return Live(State.NO_RECORD, drawn, False, trouble=trouble)
    try:
        record = doors.open_record(station.record_path)
    except UNREACHABLE as error:
        trouble = f"{trouble}; {error}"
        return Live(State.STOPPED, drawn, False, since=heard.since, trouble=trouble)
    try:
        latest = record.latest()
        simulated = record.simulated
    finally:
        record.close()
    last_ns = None if latest is None else latest.last_reading_utc_ns or latest.utc_ns
    recorded = None if last_ns is None else words.utc_of(last_ns)
    return Live(
        State.STOPPED,
        drawn,
        simulated,
        # What was told already is not taken back, though the record may not have it.
        since=max((when for when in (recorded, heard.since) if when), default=None),
        trouble=trouble,
        recorded=recorded,
        unheard_s=None if heard.at is None else max(0.0, (drawn - heard.at).total_seconds()),
    )


def levels_of(alerts: Sequence[AlertRule]) -> list[dict[str, object]]:
    """Alert rules of the site file in the form of a snapshot's levels."""
    return [
        {
            "name": rule.name,
            "set": rule.set_id,
            "population": rule.population,
            "scope": rule.scope,
            "ratio": rule.ratio,
            "returns_at": rule.returns_at,
        }
        for rule in alerts
    ]


def levels_for(levels: Sequence[Snapshot], scope: Snapshot) -> list[Snapshot]:
    """The levels that watch a scope; an empty field of a level means every one."""
    keys = ("set", "population", "scope")
    return [
        level for level in levels if all(level.get(k) in ("", None, scope.get(k)) for k in keys)
    ]
