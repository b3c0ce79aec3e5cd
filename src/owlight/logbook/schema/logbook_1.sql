-- logbook.db, version 1. Times are UTC, ISO 8601 text ending in Z with microseconds, so they sort as text; `count` gives
-- the order of events, `monotonic_s` durations. Units are in the names. BER is kept as two integers: pooling needs counts.
CREATE TABLE source_text (                  -- one row a distinct text that decided something: a file, whole
  sha256 TEXT PRIMARY KEY CHECK (length(sha256) = 64),
  text TEXT NOT NULL) STRICT, WITHOUT ROWID;
CREATE TABLE software (                     -- one row a distinct set of versions
  software_id INTEGER PRIMARY KEY,
  versions_json TEXT NOT NULL UNIQUE) STRICT;
CREATE TABLE run (
  run TEXT PRIMARY KEY,                     -- lasting id, the same on every machine
  name TEXT NOT NULL,
  simulated INTEGER NOT NULL CHECK (simulated IN (0, 1)),
  seed INTEGER NOT NULL,
  software_id INTEGER NOT NULL REFERENCES software,
  started_utc TEXT NOT NULL,
  host TEXT NOT NULL, operator TEXT NOT NULL, command_line TEXT NOT NULL,
  reproduces TEXT,
  planned_stays INTEGER NOT NULL CHECK (planned_stays >= 0),
  plan_json TEXT NOT NULL,
  captures_file TEXT NOT NULL,
  captures_sha256 TEXT                      -- NULL until the file is sealed: somebody has it open, or the run broke off
  ) STRICT, WITHOUT ROWID;
CREATE INDEX run_started ON run(started_utc);
CREATE TABLE source (                       -- which texts a run was made of
  run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  kind TEXT NOT NULL, name TEXT NOT NULL,
  sha256 TEXT NOT NULL REFERENCES source_text,
  PRIMARY KEY (run, kind, name)) STRICT, WITHOUT ROWID;
CREATE TABLE segment (                      -- an uninterrupted part of a run
  run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  number INTEGER NOT NULL CHECK (number >= 1),
  reason TEXT NOT NULL, started_utc TEXT NOT NULL, pid INTEGER NOT NULL,
  discarded_captures INTEGER NOT NULL DEFAULT 0,
  ended_utc TEXT, state TEXT CHECK (state IN ('finished', 'broken off', 'called off', 'gave up')), end_reason TEXT,
  PRIMARY KEY (run, number),
  CHECK ((ended_utc IS NULL) = (state IS NULL))) STRICT, WITHOUT ROWID;
CREATE TABLE identity (                     -- who answered in which role
  run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  segment INTEGER NOT NULL, role TEXT NOT NULL, at_utc TEXT NOT NULL, resource TEXT NOT NULL,
  maker TEXT NOT NULL, model TEXT NOT NULL, serial_number TEXT NOT NULL, firmware TEXT NOT NULL, driver TEXT NOT NULL,
  PRIMARY KEY (run, segment, role)) STRICT, WITHOUT ROWID;
CREATE INDEX identity_serial ON identity(serial_number);
CREATE TABLE point (                        -- one combination of sweep settings
  run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  point INTEGER NOT NULL CHECK (point >= 0),
  reference INTEGER NOT NULL CHECK (reference IN (0, 1)),
  curve TEXT NOT NULL,                      -- settings of all axes but received power, '' if there are none
  settings_json TEXT NOT NULL,
  PRIMARY KEY (run, point)) STRICT, WITHOUT ROWID;
CREATE TABLE attempt (                      -- one stay at a point
  run TEXT NOT NULL, point INTEGER NOT NULL, attempt INTEGER NOT NULL CHECK (attempt >= 1),
  segment INTEGER NOT NULL, count INTEGER NOT NULL,
  reason TEXT NOT NULL, outcome TEXT NOT NULL CHECK (outcome IN ('ok', 'failed')), outcome_reason TEXT NOT NULL,
  planned_time_s REAL NOT NULL, captures_planned INTEGER NOT NULL,
  started_utc TEXT NOT NULL, started_count INTEGER NOT NULL, ended_utc TEXT NOT NULL,
  seconds REAL NOT NULL CHECK (seconds >= 0),
  requested_dbm REAL, attenuation_set_db REAL, attenuation_read_db REAL,
  tap_before_w REAL, tap_before_sd_w REAL, tap_after_w REAL, tap_after_sd_w REAL,
  received_power_dbm REAL, received_power_u_db REAL CHECK (received_power_u_db >= 0),
  finished_json TEXT NOT NULL,   -- the event, whole: what a resume decides from
  PRIMARY KEY (run, point, attempt),
  FOREIGN KEY (run, point) REFERENCES point ON DELETE CASCADE) STRICT;
CREATE INDEX attempt_order ON attempt(run, count);
CREATE TABLE capture (                      -- header of a record; its samples are in the captures file
  run TEXT NOT NULL, point INTEGER NOT NULL, attempt INTEGER NOT NULL, number INTEGER NOT NULL CHECK (number >= 1),
  at_utc TEXT NOT NULL, sample_rate_hz REAL NOT NULL CHECK (sample_rate_hz > 0), seed INTEGER NOT NULL,
  kept INTEGER NOT NULL CHECK (kept IN (0, 1)),
  PRIMARY KEY (run, point, attempt, number),
  FOREIGN KEY (run, point, attempt) REFERENCES attempt ON DELETE CASCADE) STRICT, WITHOUT ROWID;
CREATE TABLE lane (
  run TEXT NOT NULL, point INTEGER NOT NULL, attempt INTEGER NOT NULL, number INTEGER NOT NULL, lane TEXT NOT NULL,
  position INTEGER NOT NULL, samples INTEGER NOT NULL, volts_per_code REAL NOT NULL, offset_v REAL NOT NULL,
  clipped_fraction REAL NOT NULL CHECK (clipped_fraction BETWEEN 0 AND 1),
  sha256 TEXT NOT NULL CHECK (length(sha256) = 64),
  PRIMARY KEY (run, point, attempt, number, lane),
  FOREIGN KEY (run, point, attempt, number) REFERENCES capture ON DELETE CASCADE) STRICT, WITHOUT ROWID;
CREATE TABLE analysis (                     -- one chain and one software applied to captures; a second stands beside it
  analysis INTEGER PRIMARY KEY,
  run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  chain_sha256 TEXT NOT NULL, software_id INTEGER NOT NULL REFERENCES software,
  UNIQUE (run, chain_sha256, software_id)) STRICT;
CREATE TABLE demodulation (
  analysis INTEGER NOT NULL REFERENCES analysis ON DELETE CASCADE,
  run TEXT NOT NULL, point INTEGER NOT NULL, attempt INTEGER NOT NULL, number INTEGER NOT NULL,
  status TEXT NOT NULL CHECK (status IN ('locked', 'no lock')), reason TEXT NOT NULL,
  snr_db REAL, evm_percent REAL, gmi_bits REAL, seconds REAL NOT NULL,
  PRIMARY KEY (analysis, point, attempt, number),
  FOREIGN KEY (run, point, attempt, number) REFERENCES capture ON DELETE CASCADE) STRICT, WITHOUT ROWID;
CREATE TABLE tributary (                    -- no row where there was no lock: there is nothing to divide
  analysis INTEGER NOT NULL, point INTEGER NOT NULL, attempt INTEGER NOT NULL, number INTEGER NOT NULL,
  tributary TEXT NOT NULL, position INTEGER NOT NULL,
  bits INTEGER NOT NULL CHECK (bits >= 0), errors INTEGER NOT NULL CHECK (errors BETWEEN 0 AND bits), snr_db REAL,
  PRIMARY KEY (analysis, point, attempt, number, tributary),
  FOREIGN KEY (analysis, point, attempt, number) REFERENCES demodulation ON DELETE CASCADE) STRICT, WITHOUT ROWID;
CREATE TABLE stage (
  analysis INTEGER NOT NULL, point INTEGER NOT NULL, attempt INTEGER NOT NULL, number INTEGER NOT NULL,
  position INTEGER NOT NULL, stage TEXT NOT NULL, seconds REAL NOT NULL,
  figures_json TEXT NOT NULL,
  PRIMARY KEY (analysis, point, attempt, number, position),
  FOREIGN KEY (analysis, point, attempt, number) REFERENCES demodulation ON DELETE CASCADE) STRICT, WITHOUT ROWID;
CREATE TABLE setting (                      -- asked for and read back
  setting_id INTEGER PRIMARY KEY, run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  at_utc TEXT NOT NULL, count INTEGER NOT NULL, role TEXT NOT NULL, name TEXT NOT NULL, unit TEXT NOT NULL,
  requested ANY NOT NULL, read_back ANY, tolerance REAL, within INTEGER NOT NULL CHECK (within IN (0, 1)),
  settled_s REAL NOT NULL) STRICT;
CREATE INDEX setting_run ON setting(run, role, name);
CREATE TABLE reading (
  reading_id INTEGER PRIMARY KEY, run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  at_utc TEXT NOT NULL, count INTEGER NOT NULL, monotonic_s REAL NOT NULL, role TEXT NOT NULL, name TEXT NOT NULL,
  unit TEXT NOT NULL, value REAL, standard_deviation REAL, readings INTEGER NOT NULL, phase TEXT NOT NULL) STRICT;
CREATE INDEX reading_run ON reading(run, role, name);
CREATE INDEX reading_order ON reading(run, count);
CREATE TABLE finding (                      -- trust checks and their answers
  finding_id INTEGER PRIMARY KEY, run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  point INTEGER, attempt INTEGER, name TEXT NOT NULL, subject TEXT NOT NULL, statistic REAL, limit_value REAL,
  finding TEXT NOT NULL CHECK (finding IN ('ok', 'doubtful', 'bad', 'not evaluated')), words TEXT NOT NULL,
  conclusion_id INTEGER REFERENCES conclusion ON DELETE CASCADE) STRICT;   -- NULL: asked while measuring
CREATE INDEX finding_run ON finding(run, finding);
CREATE TABLE annotation (                   -- what a person decided about a stay: who, when, why; reversible
  annotation_id INTEGER PRIMARY KEY, run TEXT NOT NULL REFERENCES run ON DELETE CASCADE, at_utc TEXT NOT NULL,
  point INTEGER, attempt INTEGER, who TEXT NOT NULL, what TEXT NOT NULL, why TEXT NOT NULL) STRICT;
CREATE TABLE event (
  event_id INTEGER PRIMARY KEY, run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  at_utc TEXT NOT NULL, count INTEGER NOT NULL, role TEXT NOT NULL,
  severity TEXT NOT NULL CHECK (severity IN ('info', 'warning', 'fault', 'interlock')), words TEXT NOT NULL) STRICT;
CREATE INDEX event_run ON event(run, severity);
CREATE TABLE exchange (                     -- every message and response; blocks as length and hash
  exchange_id INTEGER PRIMARY KEY, run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  at_utc TEXT NOT NULL, count INTEGER NOT NULL, role TEXT NOT NULL, sent TEXT NOT NULL, received TEXT NOT NULL,
  block_bytes INTEGER, block_sha256 TEXT, seconds REAL NOT NULL, trouble TEXT NOT NULL,
  maybe_executed INTEGER NOT NULL CHECK (maybe_executed IN (0, 1))) STRICT;
CREATE INDEX exchange_run ON exchange(run, role);
CREATE INDEX exchange_trouble ON exchange(run) WHERE trouble <> '';
CREATE TABLE safe_state (
  run TEXT NOT NULL REFERENCES run ON DELETE CASCADE, count INTEGER NOT NULL, at_utc TEXT NOT NULL,
  confirmed INTEGER NOT NULL CHECK (confirmed IN (0, 1)), steps_json TEXT NOT NULL,
  PRIMARY KEY (run, count)) STRICT, WITHOUT ROWID;
CREATE TABLE conclusion (                   -- what the counts say; the newest holds
  conclusion_id INTEGER PRIMARY KEY, run TEXT NOT NULL REFERENCES run ON DELETE CASCADE,
  at_utc TEXT NOT NULL, software_id INTEGER NOT NULL REFERENCES software,
  conclusion_json TEXT NOT NULL) STRICT;
CREATE TABLE sensitivity (
  conclusion_id INTEGER NOT NULL REFERENCES conclusion ON DELETE CASCADE, run TEXT NOT NULL, curve TEXT NOT NULL,
  received_power_dbm REAL NOT NULL, statistical_low_dbm REAL NOT NULL, statistical_high_dbm REAL NOT NULL,
  low_dbm REAL NOT NULL, high_dbm REAL NOT NULL, coverage REAL NOT NULL,
  extrapolated INTEGER NOT NULL CHECK (extrapolated IN (0, 1)), method TEXT NOT NULL,
  PRIMARY KEY (conclusion_id, curve)) STRICT, WITHOUT ROWID;
CREATE TABLE curve_point (                  -- the curve as it was concluded, intervals included
  conclusion_id INTEGER NOT NULL REFERENCES conclusion ON DELETE CASCADE, run TEXT NOT NULL,
  curve TEXT NOT NULL, point INTEGER NOT NULL, received_power_dbm REAL NOT NULL, received_power_u_db REAL NOT NULL,
  errors INTEGER NOT NULL, bits INTEGER NOT NULL, ber REAL, ber_low REAL NOT NULL, ber_high REAL NOT NULL,
  upper_limit INTEGER NOT NULL CHECK (upper_limit IN (0, 1)), stays INTEGER NOT NULL,
  captures_locked INTEGER NOT NULL, captures_total INTEGER NOT NULL, fitted INTEGER NOT NULL CHECK (fitted IN (0, 1)),
  findings TEXT NOT NULL,
  PRIMARY KEY (conclusion_id, curve, point), CHECK (captures_locked <= captures_total),
  CHECK ((ber IS NULL) = (errors = 0))) STRICT, WITHOUT ROWID;

-- for people
CREATE VIEW stay AS                         -- one row a stay, with what the night's own (first) analysis counted
  SELECT a.run, a.point, a.attempt, p.curve, p.reference, a.reason, a.outcome, a.count, a.started_utc, a.seconds,
    a.requested_dbm, a.received_power_dbm, a.received_power_u_db, a.tap_before_w, a.tap_after_w,
    (SELECT count(*) FROM capture c WHERE (c.run, c.point, c.attempt) = (a.run, a.point, a.attempt)) AS captures,
    (SELECT count(*) FROM demodulation d WHERE (d.analysis, d.point, d.attempt) = (n.analysis, a.point, a.attempt)
      AND d.status = 'locked') AS locked,
    (SELECT count(*) FROM demodulation d WHERE (d.analysis, d.point, d.attempt) = (n.analysis, a.point, a.attempt))
      AS demodulated,
    (SELECT sum(t.errors) FROM tributary t WHERE (t.analysis, t.point, t.attempt) = (n.analysis, a.point, a.attempt))
      AS errors,
    (SELECT sum(t.bits) FROM tributary t WHERE (t.analysis, t.point, t.attempt) = (n.analysis, a.point, a.attempt))
      AS bits
  FROM attempt a JOIN point p USING (run, point)
    LEFT JOIN (SELECT run, min(analysis) AS analysis FROM analysis GROUP BY run) n USING (run);
CREATE VIEW ber_curve AS                    -- errors and bits are summed, never BERs averaged; powers averaged in watts by bits
  SELECT run, curve, point, round(10 * log10(sum(bits * pow(10, received_power_dbm / 10)) / sum(bits)), 4)
      AS received_power_dbm,
    count(*) AS stays, sum(errors) AS errors, sum(bits) AS bits,
    CASE WHEN sum(errors) > 0 THEN CAST(sum(errors) AS REAL) / sum(bits) END AS ber,
    CASE WHEN sum(errors) = 0 AND sum(bits) > 0 THEN 2.9957 / sum(bits) END AS ber_upper_limit_95
  FROM stay WHERE outcome = 'ok' AND NOT reference AND bits > 0
  GROUP BY run, curve, point ORDER BY run, curve, received_power_dbm;
CREATE VIEW stay_reading AS                 -- what was read at which settings; stays overlap in `count`, so the stay itself says
  SELECT a.run, a.point, p.curve AS settings, a.requested_dbm, a.attempt, r.at_utc, r.phase, r.role, r.name, r.value,
    r.standard_deviation, r.readings, r.unit
  FROM attempt a JOIN point p USING (run, point) JOIN json_each(a.finished_json, '$.readings') j
    JOIN reading r ON r.run = a.run AND r.count = json_extract(j.value, '$.at.count')
  WHERE a.outcome = 'ok' ORDER BY a.run, r.count;
CREATE VIEW run_state AS                    -- '' while the last segment has no end: measuring, or broken off
  SELECT r.run, r.name,                     -- also one whose bench file gives plain addresses of simulated instruments
    r.simulated OR EXISTS (SELECT 1 FROM identity i WHERE i.run = r.run AND i.maker = 'Simulated') AS simulated, s.pid, r.started_utc, coalesce(s.ended_utc, '') AS ended_utc,
    coalesce(s.state, '') AS state, coalesce(s.end_reason, '') AS end_reason, r.planned_stays,
    (SELECT count(*) FROM attempt a WHERE a.run = r.run AND a.outcome = 'ok') AS stays_done,
    (SELECT count(*) FROM attempt a WHERE a.run = r.run AND a.outcome = 'failed') AS stays_failed,
    (SELECT count(*) FROM event e WHERE e.run = r.run AND e.severity IN ('fault', 'interlock')) AS faults
  FROM run r LEFT JOIN segment s ON s.run = r.run
    AND s.number = (SELECT max(number) FROM segment m WHERE m.run = r.run);
CREATE VIEW result AS                       -- the newest conclusion's sensitivities
  SELECT r.name, s.* FROM sensitivity s JOIN run r USING (run)
  WHERE s.conclusion_id = (SELECT max(c.conclusion_id) FROM conclusion c WHERE c.run = s.run);
CREATE VIEW out_of_tolerance AS
  SELECT run, at_utc, role, name, requested, read_back, unit, tolerance FROM setting WHERE NOT within;
CREATE VIEW capture_missing AS              -- the invariant, empty in a sound logbook: a demodulation without its capture
  SELECT d.run, d.point, d.attempt, d.number FROM demodulation d
  WHERE NOT EXISTS (SELECT 1 FROM capture c
    WHERE (c.run, c.point, c.attempt, c.number) = (d.run, d.point, d.attempt, d.number));
