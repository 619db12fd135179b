"""The site file: what stands where, which limits apply, when to raise an alarm."""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from monitor import tomlfile
from monitor.core.alarms import AlertRule
from monitor.core.errors import ConfigError
from monitor.core.exposure import FIELD_REGIONS
from monitor.core.keys import Table
from monitor.core.limits import POPULATIONS, SCOPES
from monitor.installed import Installed, read_installed
from monitor.sitebands import Band as Band
from monitor.sitebands import Channel as Channel
from monitor.sitebands import bands_of, channels_of, named
from monitor.tomlfile import TopTable

OCCUPANCIES = ("public", "controlled")
DAY_S = 86_400.0


@dataclass(frozen=True, slots=True)
class Site:
    """A site file, read and checked. Paths are absolute; sensor_options are the front end's own."""

    path: Path
    name: str
    place: str
    simulated: bool
    occupancy: str
    field_region: str
    record_path: Path
    commit_s: float
    sensor_kind: str
    hold_s: float
    calibration: Path
    sensor_options: Mapping[str, object]
    channels: tuple[Channel, ...]
    bands: Mapping[str, Band]
    limit_sets: tuple[str, ...]
    alerts: tuple[AlertRule, ...]
    silence_after_s: float
    host: str
    port: int
    installed: tuple[Installed, ...] = ()

    @property
    def control_path(self) -> Path:
        """The control socket, beside the record."""
        return self.record_path.with_suffix(".sock")

    @property
    def evidence_path(self) -> Path:
        """The folder of recordings, beside the record."""
        return self.record_path.with_suffix(".iq")


def default_site_path(explicit: Path | str | None = None) -> Path:
    """The site file to use: the one asked for, $FIELDSILL_SITE, ./site.toml, /etc/fieldsill's.

    ConfigError where there is none.
    """
    named = explicit or os.environ.get("FIELDSILL_SITE")
    if named:
        return Path(named)
    places = (Path("site.toml"), Path("/etc/fieldsill/site.toml"))
    for place in places:
        if place.is_file():
            return place
    looked = ", ".join(["$FIELDSILL_SITE", *(f"{place}" for place in places)])
    raise ConfigError(
        f"no site file; looked in {looked}; write one from hardware/examples or run "
        "fieldsill rehearse"
    )


def load_site(path: Path | str) -> Site:
    """Read and check a site file; the first mistake is one line 'site.toml: table.key: what'."""
    path = Path(path).absolute()
    if not path.is_file():
        raise ConfigError(f"no site file {path}; write one from hardware/examples")
    return _read(tomlfile.read(path, "site file")[0], path)


def site_of(body: bytes, path: Path) -> Site:
    """The site of a text that is kept elsewhere; path: where its relative paths begin."""
    return _read(tomlfile.parse(body, path.name, "site file"), path)


def _read(top: TopTable, path: Path) -> Site:
    values: dict[str, object] = {"path": path}
    values |= _site(top.table("site")) | _record(top.table("record"), path.parent)
    values |= _sensor(top, path.parent) | _pages(top.table("pages", {}))
    bands = bands_of(top)
    sets = _limit_sets(top)
    silence = top.table("silence", {})
    values |= {
        "channels": channels_of(top, bands),
        "bands": bands,
        "limit_sets": sets,
        "alerts": _alerts(top, sets),
        "silence_after_s": silence.number("after_s", 60.0, 1.0, DAY_S),
        "installed": read_installed(top),
    }
    silence.finish()
    top.finish()
    return Site(**values)  # type: ignore[arg-type]


def _site(table: Table) -> dict[str, object]:
    values: dict[str, object] = {
        "name": named(table, "name"),
        "place": table.text("place", ""),
        "simulated": table.flag("simulated"),
        "occupancy": table.text("occupancy", choices=OCCUPANCIES),
        "field_region": table.text("field_region", "undeclared", FIELD_REGIONS),
    }
    table.finish()
    return values


def _record(table: Table, folder: Path) -> dict[str, object]:
    values: dict[str, object] = {
        "record_path": folder / named(table, "path"),
        "commit_s": table.number("commit_s", 10.0, 1.0, 3600.0),
    }
    table.finish()
    return values


def _sensor(top: TopTable, folder: Path) -> dict[str, object]:
    table = top.table("sensor")
    values: dict[str, object] = {
        "sensor_kind": named(table, "kind"),
        "hold_s": table.number("hold_s", low=0.001, high=DAY_S),
        "calibration": folder / named(table, "calibration"),
    }
    options = dict(top.any("sensor"))
    for key in ("kind", "hold_s", "calibration"):
        del options[key]
    return values | {"sensor_options": options}


def _pages(table: Table) -> dict[str, object]:
    values: dict[str, object] = {
        "host": table.text("host", "127.0.0.1"),
        "port": table.whole("port", 8080, 0, 65535),
    }
    table.finish()
    return values


def _limit_sets(top: TopTable) -> tuple[str, ...]:
    table = top.table("limits")
    sets = table.any("sets")
    table.finish()
    if not isinstance(sets, list) or not sets or not all(isinstance(s, str) for s in sets):
        raise table.error("sets", "must be a list of set ids, for example ['icnirp-2020']")
    if len(set(sets)) != len(sets):
        raise table.error("sets", "names a set twice")
    return tuple(sets)


def _alerts(top: TopTable, sets: Sequence[str]) -> tuple[AlertRule, ...]:
    rules: list[AlertRule] = []
    for table in top.tables("alert", []):
        rule = AlertRule(
            name=named(table, "name"),
            set_id=table.text("set", "", sets),
            population=table.text("population", "", POPULATIONS),
            scope=table.text("scope", "", SCOPES),
            ratio=table.number("ratio", low=1e-9, high=1e9),
            returns_at=table.number("returns_at", low=0.0, high=1e9),
            delay_s=table.number("delay_s", 0.0, 0.0, DAY_S),
            return_delay_s=table.number("return_delay_s", 0.0, 0.0, DAY_S),
        )
        table.finish()
        if rule.returns_at >= rule.ratio:
            raise table.error("returns_at", f"{rule.returns_at:g} must be below ratio")
        if rule.name in {other.name for other in rules}:
            raise table.error("name", f"{rule.name!r} is there already")
        rules.append(rule)
    return tuple(rules)
