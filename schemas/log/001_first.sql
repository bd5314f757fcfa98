-- SPDX-License-Identifier: Apache-2.0
-- The log's first form. Runs inside one transaction, which also sets the two numbers of the file's header: what the file is
-- (`Hfln`) and which migration it stands at. A later change is a file of its own, 002_....sql; this one stays as it is.
--
-- Times are nanoseconds since 1970-01-01 00:00:00 UTC. Units are in the names. NULL in a REAL column: there is no such value.
-- Reading beside a running daemon is safe:   sqlite3 -readonly nights.db 'SELECT ...'
-- A copy is made with the online backup:     sqlite3 nights.db '.backup copy.db'     (never by copying the file alone)
PRAGMA application_id = 0x48666c6e;
PRAGMA user_version = 1;

-- Everything that happened to a drive, in the order of commitment. Rows are only ever added.
CREATE TABLE event (
  number INTEGER PRIMARY KEY CHECK (number > 0),   -- order of commitment
  drive TEXT NOT NULL CHECK (drive <> ''),
  kind TEXT NOT NULL CHECK (kind IN ('fit', 'applied', 'hold', 'release')),
  happened_at INTEGER NOT NULL,                    -- taken_at of a scan, applied_at of pulses
  received_at INTEGER NOT NULL,
  id TEXT NOT NULL,                                -- of the request
  scan_name TEXT NOT NULL,
  axis TEXT NOT NULL,                              -- duration, detuning; '' unless a fit
  verdict TEXT NOT NULL,                           -- apply, keep, refuse; '' unless a fit
  effect TEXT NOT NULL,                            -- how it moved the tracked state: none, first, accepted, pending, confirmed, aside
  reasons TEXT NOT NULL,                           -- codes, most serious first, separated by spaces
  rabi_hz REAL,                                    -- bare peak coupling over 2 pi, with its sigma and 95 % interval
  rabi_sigma_hz REAL,
  rabi_low_hz REAL,
  rabi_high_hz REAL,
  generalised_hz REAL,                             -- what the flop itself shows
  generalised_sigma_hz REAL,
  line_offset_hz REAL,                             -- to be added to the carrier
  line_offset_sigma_hz REAL,
  line_width_hz REAL,                              -- full width at half maximum
  carrier_hz REAL,                                 -- the experiment's own number for its carrier
  dead_time_s REAL,
  dead_time_sigma_s REAL,
  intensity_w_m2 REAL,
  drive_amplitude REAL,
  span REAL,                                       -- of the scan's axis, s or Hz
  spacing REAL,
  by_whom TEXT NOT NULL,                           -- hold, release: the person and the reason
  why TEXT NOT NULL
) STRICT;

-- An index ends in the row's number by itself, so both are ordered by (happened_at, number).
CREATE INDEX event_of_drive ON event (drive, happened_at);
CREATE INDEX event_in_time ON event (happened_at);

-- Pulse lengths of an event: of a fit those proposed, of `applied` those that the experiment now uses.
CREATE TABLE pulse (
  event INTEGER NOT NULL REFERENCES event (number),
  name TEXT NOT NULL,
  length_s REAL,
  PRIMARY KEY (event, name)
) STRICT, WITHOUT ROWID;

-- A fit's bulk: the scan as it came and the answer as it went.
CREATE TABLE fit (
  event INTEGER PRIMARY KEY REFERENCES event (number),
  scan BLOB,                                       -- canonical MessagePack; NULL where it was not kept
  fingerprint TEXT NOT NULL,                       -- of the scan
  configuration TEXT NOT NULL,                     -- fingerprint of the configuration it was fitted under
  reply BLOB NOT NULL                              -- MessagePack, without overlay
) STRICT;
CREATE INDEX fit_by_fingerprint ON fit (fingerprint);

-- What was measured beside the scan (temperatures, powers, fields), by the experiment's own names.
CREATE TABLE ambient (
  event INTEGER NOT NULL REFERENCES fit (event),
  name TEXT NOT NULL,
  value REAL,
  PRIMARY KEY (event, name)
) STRICT, WITHOUT ROWID;

-- Replies by the request's id, for seven days: the same request finds its reply again.
CREATE TABLE reply (
  id TEXT NOT NULL UNIQUE,
  digest TEXT NOT NULL,                            -- of the request's content
  reply BLOB NOT NULL,                             -- MessagePack
  kept_at INTEGER NOT NULL
) STRICT;
CREATE INDEX reply_in_time ON reply (kept_at);

-- Configurations under which scans were fitted, as text, each once.
CREATE TABLE configuration (
  fingerprint TEXT NOT NULL PRIMARY KEY,
  text TEXT NOT NULL,
  kept_at INTEGER NOT NULL
) STRICT, WITHOUT ROWID;
