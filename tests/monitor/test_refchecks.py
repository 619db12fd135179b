"""What a request to keep a reference check cannot hold."""

from __future__ import annotations

import pytest

from monitor.core.errors import ConfigError
from monitor.refchecks import event_of
from tests.cli.test_calibration_checks import REQUEST


@pytest.mark.parametrize("value", [1e300, -1e300, 10**400])
def test_a_level_beyond_any_is_not_kept(value: float) -> None:
    """The difference of two such would be no number, and its event could not be written."""
    with pytest.raises(ConfigError, match="applied_dbm: .* is not a number, or beyond 1e"):
        event_of({**REQUEST, "applied_dbm": value}, ["east"], 0)


@pytest.mark.parametrize("key", ["from_utc", "to_utc"])
def test_a_check_without_a_time_of_the_calendar_is_not_kept(key: str) -> None:
    with pytest.raises(ConfigError, match=f"{key}: 'at noon' is not an RFC 3339 time"):
        event_of({**REQUEST, key: "at noon"}, ["east"], 0)
