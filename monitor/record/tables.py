"""The tables and views of each schema, as text; FORMAT.md says what each column means."""

from __future__ import annotations

V1_TABLES = """
CREATE TABLE meta (key TEXT PRIMARY KEY, value TEXT NOT NULL) STRICT, WITHOUT ROWID;
CREATE TABLE boots (
  boot INTEGER PRIMARY KEY, boot_id TEXT NOT NULL, kind TEXT NOT NULL,
  UNIQUE (boot_id, kind)) STRICT;
CREATE TABLE clock_fixes (
  boot INTEGER NOT NULL, boot_ns INTEGER NOT NULL, utc_ns INTEGER NOT NULL,
  source TEXT NOT NULL, uncertainty_ns INTEGER NOT NULL CHECK (uncertainty_ns >= 0),
  PRIMARY KEY (boot, boot_ns, source)) STRICT, WITHOUT ROWID;
CREATE TABLE documents (
  document INTEGER PRIMARY KEY, hash TEXT NOT NULL UNIQUE, kind TEXT NOT NULL,
  body BLOB NOT NULL) STRICT;
CREATE TABLE calibrations (
  calibration INTEGER PRIMARY KEY, identity TEXT NOT NULL UNIQUE) STRICT;
CREATE TABLE channels (
  channel INTEGER PRIMARY KEY, name TEXT NOT NULL, axis TEXT NOT NULL, band TEXT NOT NULL) STRICT;
CREATE TABLE scopes (
  scope INTEGER PRIMARY KEY, set_id TEXT NOT NULL, edition TEXT NOT NULL,
  population TEXT NOT NULL, scope_kind TEXT NOT NULL, averaging_s REAL NOT NULL,
  verified INTEGER NOT NULL CHECK (verified IN (0, 1)), clause TEXT NOT NULL,
  UNIQUE (set_id, edition, population, scope_kind, averaging_s, verified, clause)) STRICT;
CREATE TABLE flag_words (bit INTEGER PRIMARY KEY, meaning TEXT NOT NULL) STRICT;
CREATE TABLE verdict_words (verdict INTEGER PRIMARY KEY, meaning TEXT NOT NULL) STRICT;
CREATE TABLE raw (
  seq INTEGER PRIMARY KEY, boot INTEGER NOT NULL, start_ns INTEGER NOT NULL,
  end_ns INTEGER NOT NULL, n INTEGER NOT NULL, channels INTEGER NOT NULL,
  body BLOB NOT NULL) STRICT;
CREATE TABLE raw_marks (
  seq INTEGER PRIMARY KEY, boot INTEGER NOT NULL, start_ns INTEGER NOT NULL) STRICT;
CREATE TABLE blocks (
  derivation INTEGER NOT NULL, boot INTEGER NOT NULL, start_ns INTEGER NOT NULL,
  channel INTEGER NOT NULL, energy_w_ns REAL NOT NULL, covered_ns INTEGER NOT NULL,
  observed_ns INTEGER NOT NULL, min_w REAL, max_w REAL, n INTEGER NOT NULL,
  flags INTEGER NOT NULL, temperature_c REAL, calibration INTEGER,
  PRIMARY KEY (derivation, boot, start_ns, channel)) STRICT, WITHOUT ROWID;
CREATE TABLE windows (
  derivation INTEGER NOT NULL, boot INTEGER NOT NULL, end_ns INTEGER NOT NULL,
  averaging_s INTEGER NOT NULL, channel INTEGER NOT NULL, energy_w_ns REAL NOT NULL,
  covered_ns INTEGER NOT NULL, observed_ns INTEGER NOT NULL, max_w REAL, flags INTEGER NOT NULL,
  PRIMARY KEY (derivation, boot, end_ns, averaging_s, channel)) STRICT, WITHOUT ROWID;
CREATE TABLE fields (
  derivation INTEGER NOT NULL, boot INTEGER NOT NULL, end_ns INTEGER NOT NULL,
  averaging_s INTEGER NOT NULL, e2_low REAL, e2_mean REAL, e2_high REAL, e2_max REAL,
  u_db REAL, k REAL, valid_share REAL NOT NULL, observed_share REAL NOT NULL,
  flags INTEGER NOT NULL,
  PRIMARY KEY (derivation, boot, end_ns, averaging_s)) STRICT, WITHOUT ROWID;
CREATE TABLE exposures (
  derivation INTEGER NOT NULL, boot INTEGER NOT NULL, end_ns INTEGER NOT NULL,
  scope INTEGER NOT NULL, ratio_low REAL, ratio_mean REAL, ratio_high REAL, u_db REAL,
  verdict INTEGER NOT NULL,
  PRIMARY KEY (derivation, boot, end_ns, scope)) STRICT, WITHOUT ROWID;
CREATE TABLE field_spans (
  derivation INTEGER NOT NULL, boot INTEGER NOT NULL, day INTEGER NOT NULL,
  hour INTEGER NOT NULL, averaging_s INTEGER NOT NULL, end_ns INTEGER NOT NULL,
  e2_low REAL, e2_mean REAL, e2_high REAL, e2_max REAL, u_db REAL, valid_share REAL NOT NULL,
  flags INTEGER NOT NULL,
  PRIMARY KEY (derivation, boot, day, hour, averaging_s)) STRICT, WITHOUT ROWID;
CREATE TABLE exposure_spans (
  derivation INTEGER NOT NULL, boot INTEGER NOT NULL, day INTEGER NOT NULL,
  hour INTEGER NOT NULL, scope INTEGER NOT NULL, end_ns INTEGER NOT NULL,
  ratio_low REAL, ratio_mean REAL, ratio_high REAL,
  PRIMARY KEY (derivation, boot, day, hour, scope)) STRICT, WITHOUT ROWID;
CREATE TABLE measured_hours (
  derivation INTEGER NOT NULL, boot INTEGER NOT NULL, hour INTEGER NOT NULL,
  measured_ns INTEGER NOT NULL, minutes INTEGER NOT NULL,
  PRIMARY KEY (derivation, boot, hour)) STRICT, WITHOUT ROWID;
CREATE TABLE events (
  event INTEGER PRIMARY KEY, boot INTEGER NOT NULL, boot_ns INTEGER NOT NULL,
  kind TEXT NOT NULL, name TEXT NOT NULL, body TEXT NOT NULL) STRICT;
CREATE INDEX alarm_events ON events (kind, name)
  WHERE kind IN ('alarm', 'confirmed', 'muted');
"""

_UTC = "strftime('%Y-%m-%dT%H:%M:%fZ', ({} + offset_ns) / 1e9, 'unixepoch')"
_DBM = "round(10 * log10({} * 1000), 3)"

V1_VIEWS = {
    # The one rule by which UTC is found; fixes.winner is its twin, for the reader.
    "boot_utc": """
SELECT boot, offset_ns, uncertainty_ns FROM (
  SELECT *, row_number() OVER (
    PARTITION BY boot ORDER BY boot_ns DESC, uncertainty_ns, source) AS place
  FROM (
    SELECT *, min(uncertainty_ns) OVER (PARTITION BY boot) AS smallest
    FROM (
      SELECT *,
        max(iif(uncertainty_ns < 86400000000000, offset_ns - uncertainty_ns, NULL))
          OVER later AS at_least,
        min(iif(uncertainty_ns < 86400000000000, offset_ns + uncertainty_ns, NULL))
          OVER later AS at_most
      FROM (SELECT *, utc_ns - boot_ns AS offset_ns FROM clock_fixes)
      WINDOW later AS (PARTITION BY boot ORDER BY boot_ns DESC
        GROUPS BETWEEN UNBOUNDED PRECEDING AND 1 PRECEDING))
    WHERE offset_ns + uncertainty_ns >= ifnull(at_least, offset_ns)
      AND offset_ns - uncertainty_ns <= ifnull(at_most, offset_ns))
  WHERE uncertainty_ns <= 2 * smallest)
WHERE place = 1""",
    "block_levels": f"""
SELECT {_UTC.format("start_ns")} AS start_utc, derivation, boot, name, axis, band,
  {_DBM.format("energy_w_ns / nullif(covered_ns, 0)")} AS mean_dbm,
  {_DBM.format("min_w")} AS min_dbm, {_DBM.format("max_w")} AS max_dbm,
  covered_ns / 1e9 AS valid_s, n AS readings, flags, temperature_c
FROM blocks LEFT JOIN channels USING (channel) LEFT JOIN boot_utc USING (boot)""",
    "window_levels": f"""
SELECT {_UTC.format("end_ns")} AS end_utc, derivation, boot, averaging_s, name, axis, band,
  {_DBM.format("energy_w_ns / nullif(covered_ns, 0)")} AS mean_dbm,
  {_DBM.format("max_w")} AS max_dbm,
  covered_ns / (averaging_s * 1e9) AS valid_share, flags
FROM windows LEFT JOIN channels USING (channel) LEFT JOIN boot_utc USING (boot)""",
    "event_log": f"""
SELECT {_UTC.format("boot_ns")} AS utc, boot, kind, name, body
FROM events LEFT JOIN boot_utc USING (boot) ORDER BY event""",
}

V2_COLUMNS = (("fields", "added_e2"), ("exposures", "added_ratio"))
"""REAL; 0 in the rows of a record that was made without them: nothing was added there."""

V2_INDEX = """
CREATE INDEX calibration_events ON events (kind)
  WHERE kind IN ('start', 'calibration', 'reference check')"""
"""Few among many events, and every look at the past asks for them."""

V2_VIEWS = {
    "field_levels": f"""
SELECT {_UTC.format("end_ns")} AS end_utc, derivation, boot, averaging_s,
  sqrt(e2_low) AS e_low_v_per_m, sqrt(e2_mean) AS e_mean_v_per_m,
  sqrt(e2_high) AS e_high_v_per_m, sqrt(e2_max) AS e_max_v_per_m, u_db,
  sqrt(added_e2) AS added_v_per_m, k,
  valid_share, observed_share, flags
FROM fields LEFT JOIN boot_utc USING (boot)""",
    "exposure_levels": f"""
SELECT {_UTC.format("end_ns")} AS end_utc, derivation, boot, set_id, edition, population,
  scope_kind, averaging_s, ratio_low, ratio_mean, ratio_high, u_db, added_ratio,
  meaning AS verdict, verified
FROM exposures LEFT JOIN scopes USING (scope) LEFT JOIN verdict_words USING (verdict)
  LEFT JOIN boot_utc USING (boot)""",
}
