"""The journal's tables, as SQL; what the columns mean is told at the package's head."""

from gateway.journal.database import Schema

VERSION = 1

JOURNAL = Schema(
    noun="journal",
    application_id=0x4C534A4C,  # "LSJL": marks the file as ours, so that nobody else's database is ever touched.
    version=VERSION,
    tables="""
    CREATE TABLE runs (
        number INTEGER PRIMARY KEY,
        id TEXT NOT NULL UNIQUE,
        started_ns INTEGER NOT NULL,
        ended_ns INTEGER,
        how TEXT,
        plant TEXT NOT NULL,
        fingerprint TEXT NOT NULL,
        versions TEXT NOT NULL,
        host TEXT NOT NULL,
        site TEXT NOT NULL,
        layout TEXT NOT NULL,
        canonical BLOB NOT NULL
    ) STRICT;
    CREATE TABLE periods (
        run INTEGER NOT NULL REFERENCES runs (number),
        k INTEGER NOT NULL,
        due_ns INTEGER NOT NULL,
        start_us INTEGER NOT NULL,
        gather_us INTEGER,
        estimate_us INTEGER,
        synthesise_us INTEGER,
        write_us INTEGER,
        total_us INTEGER,
        iterations INTEGER,
        worst_residual_spans REAL,
        slack_us INTEGER,
        rows BLOB NOT NULL,
        PRIMARY KEY (run, k)
    ) STRICT;
    CREATE TABLE events (
        seq INTEGER PRIMARY KEY,
        run INTEGER NOT NULL REFERENCES runs (number),
        k INTEGER,
        wall_ns INTEGER NOT NULL,
        kind TEXT NOT NULL,
        section TEXT,
        detail TEXT NOT NULL,
        sentence TEXT NOT NULL
    ) STRICT;
    CREATE INDEX events_of_run ON events (run, seq);
    CREATE TABLE outcomes (
        seq INTEGER PRIMARY KEY,
        run INTEGER NOT NULL REFERENCES runs (number),
        k INTEGER,
        wall_ns INTEGER NOT NULL,
        request INTEGER NOT NULL,
        asked_ns INTEGER NOT NULL,
        who TEXT NOT NULL,
        words TEXT NOT NULL,
        state TEXT NOT NULL,
        reason TEXT NOT NULL
    ) STRICT;
    CREATE TABLE lost (
        seq INTEGER PRIMARY KEY,
        run INTEGER NOT NULL REFERENCES runs (number),
        wall_ns INTEGER NOT NULL,
        what TEXT NOT NULL,
        cause TEXT NOT NULL,
        count INTEGER NOT NULL,
        first_k INTEGER,
        last_k INTEGER,
        first_ns INTEGER NOT NULL,
        last_ns INTEGER NOT NULL
    ) STRICT;
    """,
)
