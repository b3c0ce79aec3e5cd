-- captures/<run>.db, version 1: the samples of one run, a row a lane. It carries its own scaling, so it is readable alone.
CREATE TABLE waveform (
  point INTEGER NOT NULL, attempt INTEGER NOT NULL, number INTEGER NOT NULL,
  position INTEGER NOT NULL, lane TEXT NOT NULL,
  sample_rate_hz REAL NOT NULL, samples INTEGER NOT NULL CHECK (samples > 0),
  sample_format TEXT NOT NULL CHECK (sample_format IN ('int8', 'int16')),     -- int16 is little-endian
  volts_per_code REAL NOT NULL, offset_v REAL NOT NULL,
  sha256 TEXT NOT NULL CHECK (length(sha256) = 64),                           -- of the code bytes
  codes BLOB NOT NULL,                      -- last: a header query never walks the pages of the samples
  PRIMARY KEY (point, attempt, number, position)) STRICT;
