"""The tables of ``run.db``: names, columns, version (data; no connection here).

An *intent* is committed before anything is done, its *outcome* afterwards; an intent
without outcome is in doubt. Frames belong to an intent and count once its outcome is
``done``. REAL columns are IEEE doubles, so numbers come back to the last bit.
"""

APPLICATION_ID = 0x50535750
"""Marks the file as a run journal (PRAGMA application_id)."""

SCHEMA_VERSION = 3

TABLES = """
CREATE TABLE run_meta (
    key   TEXT PRIMARY KEY,
    value TEXT NOT NULL
) STRICT;

CREATE TABLE sessions (
    session     INTEGER PRIMARY KEY,
    started_utc TEXT NOT NULL,
    owner       TEXT NOT NULL,
    ended_utc   TEXT,
    ending      TEXT
) STRICT;

CREATE TABLE intents (
    intent      INTEGER PRIMARY KEY,
    session     INTEGER NOT NULL REFERENCES sessions (session),
    kind        TEXT NOT NULL,
    step        INTEGER NOT NULL,
    mount       INTEGER NOT NULL,
    mount_deg   REAL NOT NULL,
    laser       TEXT NOT NULL,
    stage_deg   REAL NOT NULL,
    planned_s   REAL NOT NULL,
    utc         TEXT NOT NULL
) STRICT;
CREATE INDEX intents_of_step ON intents (kind, step);

CREATE TABLE outcomes (
    intent       INTEGER PRIMARY KEY REFERENCES intents (intent),
    outcome      TEXT NOT NULL CHECK (outcome IN ('done', 'failed')),
    readback_deg REAL,
    bench_s      REAL,
    detail       TEXT NOT NULL,
    utc          TEXT NOT NULL
) STRICT;

CREATE TABLE frames (
    frame       INTEGER PRIMARY KEY,
    intent      INTEGER NOT NULL REFERENCES intents (intent),
    file        TEXT NOT NULL,
    sha256      TEXT NOT NULL,
    kind        TEXT NOT NULL CHECK (kind IN ('light', 'dark')),
    exposure_ms REAL NOT NULL,
    mount       INTEGER NOT NULL,
    laser       TEXT NOT NULL,
    repeat      INTEGER NOT NULL,
    step        INTEGER NOT NULL,
    exposure    INTEGER NOT NULL,
    planned_s   REAL NOT NULL
) STRICT;
CREATE INDEX frames_of_intent ON frames (intent);

CREATE TABLE spot_searches (
    intent        INTEGER PRIMARY KEY REFERENCES intents (intent),
    background_dn REAL,
    noise_dn      REAL,
    rejected      TEXT NOT NULL,
    speckle_contrast REAL,
    grain_fwhm_px    REAL,
    speckle_measured INTEGER NOT NULL,
    marks            TEXT NOT NULL
) STRICT;

CREATE TABLE spots (
    intent         INTEGER NOT NULL REFERENCES spot_searches (intent),
    number         INTEGER NOT NULL,
    x_mm           REAL NOT NULL,
    y_mm           REAL NOT NULL,
    ux_mm          REAL NOT NULL,
    uy_mm          REAL NOT NULL,
    cxy_mm2        REAL NOT NULL,
    brightness     REAL NOT NULL,
    column_px      REAL,
    row_px         REAL,
    sigma_major_px REAL,
    sigma_minor_px REAL,
    snr            REAL,
    exposure_ms    REAL,
    saturated      INTEGER,
    shared_xx_mm2  REAL,
    shared_xy_mm2  REAL,
    shared_yy_mm2  REAL,
    PRIMARY KEY (intent, number)
) STRICT;

CREATE TABLE readings (
    intent             INTEGER PRIMARY KEY REFERENCES intents (intent),
    air_C              REAL,
    pressure_hPa       REAL,
    humidity_percent   REAL,
    part_C             REAL,
    power_mw           REAL,
    zero_x_mm          REAL,
    zero_y_mm          REAL,
    zero_brightness    REAL
) STRICT;

CREATE TABLE gate_events (
    number INTEGER PRIMARY KEY,
    utc    TEXT NOT NULL,
    step   INTEGER,
    state  TEXT NOT NULL,
    event  TEXT NOT NULL,
    detail TEXT NOT NULL
) STRICT;

CREATE TABLE faults (
    number INTEGER PRIMARY KEY,
    utc    TEXT NOT NULL,
    step   INTEGER,
    what   TEXT NOT NULL,
    detail TEXT NOT NULL,
    policy TEXT NOT NULL
) STRICT;
"""
