-- The index as it is today, for readers. The program makes it from the files in migrations/; a test compares both.

-- One row per view: one wavefront dataset in one file.
CREATE TABLE view (
  id                   TEXT    NOT NULL PRIMARY KEY,  -- stays with its path and dataset for good
  path                 TEXT    NOT NULL,              -- relative to the archive's root
  dataset              TEXT    NOT NULL,              -- path inside the file
  campaign             TEXT    NOT NULL,              -- ids are names made fit for an address
  campaign_name        TEXT    NOT NULL,
  run                  TEXT    NOT NULL,
  run_name             TEXT    NOT NULL,
  source               TEXT    NOT NULL,
  note                 TEXT    NOT NULL,
  azimuth_deg          REAL,
  elevation_deg        REAL,
  aperture_diameter_m  REAL,
  reference_length_m   REAL,
  mach                 REAL,
  velocity_m_s         REAL,
  density_kg_m3        REAL,
  temperature_k        REAL,
  wavelength_m         REAL,
  gladstone_dale_m3_kg REAL,
  frames               INTEGER NOT NULL,
  rows                 INTEGER NOT NULL,
  columns              INTEGER NOT NULL,
  points               INTEGER NOT NULL,              -- inside the native aperture
  finite_frames        INTEGER NOT NULL,
  frame_rate_hz        REAL    NOT NULL,
  duration_s           REAL    NOT NULL,              -- from the first frame to the last
  start_s              REAL    NOT NULL,              -- instant of the first frame on the file's clock
  size_bytes           INTEGER NOT NULL,
  mtime_ns             INTEGER NOT NULL,
  inode                INTEGER NOT NULL,
  metadata_digest      TEXT    NOT NULL,              -- SHA-256 of the file's structure as it was read
  folder               TEXT    NOT NULL,              -- below the state folder's views/
  state                TEXT    NOT NULL CHECK (state IN ('ready', 'missing')),
  indexed_at_ms        INTEGER NOT NULL,              -- Unix time
  checks               TEXT    NOT NULL,              -- JSON array of {code, severity, figure, text}
  opd_rms_mean_m       REAL,                          -- piston, tip, tilt and the steady lensing removed
  opd_rms_overall_m    REAL,
  UNIQUE (path, dataset)
) STRICT;
CREATE INDEX view_by_run ON view (run, azimuth_deg, elevation_deg, id);
CREATE INDEX view_by_campaign ON view (campaign, run);

-- One row per refused file, so that the index can say why it is missing.
CREATE TABLE refusal (
  path          TEXT    NOT NULL PRIMARY KEY,         -- relative to the archive's root
  code          TEXT    NOT NULL,                     -- stable, as in schema/errors.json
  text          TEXT    NOT NULL,
  refused_at_ms INTEGER NOT NULL,                     -- Unix time
  size_bytes    INTEGER NOT NULL,                     -- the file as it was: unchanged, it is not tried again
  mtime_ns      INTEGER NOT NULL,
  inode         INTEGER NOT NULL
) STRICT;

-- Rises with every change, so that a reader can tell whether anything is new. One row.
CREATE TABLE revision (
  number INTEGER NOT NULL
) STRICT;
INSERT INTO revision (number) VALUES (0);
