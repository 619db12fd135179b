"""The part of the calendar that a page shows: read from a request, and its neighbours. Pure."""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from urllib.parse import urlencode

from monitor.core.errors import ConfigError

DAY = timedelta(days=1)
_DATE = re.compile(r"^\d{4}-\d{2}-\d{2}$")
FIRST_YEAR, LAST_YEAR = 1971, 2199


@dataclass(frozen=True, slots=True)
class Span:
    """[start, end), aware UTC datetimes."""

    start: datetime
    end: datetime

    @property
    def start_ns(self) -> int:
        """UTC nanoseconds."""
        return _ns(self.start)

    @property
    def end_ns(self) -> int:
        """UTC nanoseconds."""
        return _ns(self.end)

    @property
    def seconds(self) -> float:
        """Length in seconds."""
        return (self.end - self.start).total_seconds()

    @property
    def whole_days(self) -> bool:
        """Whether it starts and ends at midnight."""
        return self.start.time() == self.end.time() == datetime.min.time()

    @property
    def query(self) -> dict[str, str]:
        """from and to as a request writes them; a whole last day is included."""
        if self.whole_days:
            last = (self.end - DAY).date()
            return {"from": self.start.date().isoformat(), "to": last.isoformat()}
        return {"from": _stamp(self.start), "to": _stamp(self.end)}

    @property
    def words(self) -> str:
        """'Saturday 1 March 2025' or '2025-03-01 to 2025-03-07', always with UTC."""
        if self.whole_days and self.end - self.start == DAY:
            return f"{self.start:%A} {self.start.day} {self.start:%B %Y}, UTC"
        if self.is_month:
            return f"{self.start:%B %Y}, UTC"
        query = self.query
        if self.whole_days:
            return f"{query['from']} to {query['to']}, both days included, UTC"
        return f"{self.start:%Y-%m-%d %H:%M} to {self.end:%Y-%m-%d %H:%M}, UTC"

    @property
    def is_month(self) -> bool:
        """Whether it is one calendar month."""
        return self == month(self.start)

    def moved(self, steps: int) -> Span:
        """The neighbour: a month for a month, else the same length; cut to the known years."""
        if self.is_month:
            inside = self.start - DAY if steps < 0 else self.end
            return month(inside)
        step = (self.end - self.start) * steps
        try:
            return Span(self.start + step, self.end + step)
        except OverflowError:
            return self

    def link(self, path: str, **keys: str) -> str:
        """The address of a page over this span."""
        return f"{path}?{urlencode({**self.query, **keys})}"


def _ns(moment: datetime) -> int:
    delta = moment - datetime(1970, 1, 1, tzinfo=UTC)
    return (delta.days * 86_400 + delta.seconds) * 1_000_000_000 + delta.microseconds * 1000


def _stamp(moment: datetime) -> str:
    return moment.isoformat().replace("+00:00", "Z")


def day(moment: datetime) -> Span:
    """The UTC day."""
    start = moment.replace(hour=0, minute=0, second=0, microsecond=0)
    return Span(start, start + DAY)


def week(moment: datetime) -> Span:
    """The ISO week, Monday to Sunday."""
    start = day(moment).start - DAY * moment.weekday()
    return Span(start, start + DAY * 7)


def month(moment: datetime) -> Span:
    """The calendar month."""
    start = day(moment).start.replace(day=1)
    return Span(start, (start + DAY * 31).replace(day=1))


def year(moment: datetime) -> Span:
    """The calendar year."""
    start = day(moment).start.replace(month=1, day=1)
    return Span(start, start.replace(year=start.year + 1))


def _read(key: str, text: str) -> tuple[datetime, bool]:
    """The moment and whether it is a bare date."""
    bare = bool(_DATE.match(text))
    try:
        moment = datetime.fromisoformat(text)
        moment = moment.replace(tzinfo=UTC) if moment.tzinfo is None else moment.astimezone(UTC)
    except (ValueError, OverflowError):
        raise ConfigError(
            f"{key}: {text!r} is not a date; write for example 2025-03-01 or 2025-03-01T07:30"
        ) from None
    if not FIRST_YEAR <= moment.year <= LAST_YEAR:
        raise ConfigError(f"{key}: {text!r} is outside the years {FIRST_YEAR} to {LAST_YEAR}")
    return moment, bare


def read(from_text: str, to_text: str, fallback: date) -> Span:
    """The span of two texts; a bare date in `to` includes that day; times are UTC unless they say.

    One text alone gives that day; none gives the fallback's day. ConfigError 'from: ...'.
    """
    from_text, to_text = from_text.strip(), to_text.strip()
    if not from_text and not to_text:
        return day(datetime(fallback.year, fallback.month, fallback.day, tzinfo=UTC))
    start, _ = _read("from", from_text) if from_text else _read("to", to_text)
    end, bare = _read("to", to_text) if to_text else _read("from", from_text)
    if not from_text:
        start = day(start).start
    if bare or not to_text:
        end = day(end).end
    if end <= start:
        raise ConfigError("to: lies before from; exchange the two dates")
    return Span(start, end)
