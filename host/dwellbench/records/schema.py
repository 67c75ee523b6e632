"""Tables, and how an older file becomes a newer one.

A migration is SQL that runs in one transaction together with the row that records it and the new `user_version`. Files of a newer
version are refused; before an older one is changed, a copy is made beside it.
"""

from __future__ import annotations

# "DWLB" in ASCII: whose file this is (SQLite's application_id).
APPLICATION_ID = 0x44574C42

MIGRATIONS: tuple[tuple[str, str], ...] = (
    (
        "runs as they are written, their samples, events and outcomes; boxes and calibrations",
        """
        CREATE TABLE migration (version INTEGER PRIMARY KEY, what TEXT NOT NULL, made_utc TEXT NOT NULL);

        CREATE TABLE box (
            id INTEGER PRIMARY KEY,
            unique_id TEXT NOT NULL UNIQUE,
            model TEXT NOT NULL,
            first_seen_utc TEXT NOT NULL
        );
        CREATE TABLE calibration (
            id INTEGER PRIMARY KEY,
            box INTEGER NOT NULL REFERENCES box(id),
            hash TEXT NOT NULL,
            document TEXT NOT NULL,
            first_seen_utc TEXT NOT NULL,
            UNIQUE (box, hash)
        );
        CREATE TABLE run (
            id INTEGER PRIMARY KEY,
            run_key TEXT NOT NULL,
            box INTEGER NOT NULL REFERENCES box(id),
            calibration INTEGER REFERENCES calibration(id),
            firmware TEXT NOT NULL,
            build TEXT NOT NULL,
            simulated INTEGER NOT NULL CHECK (simulated IN (0, 1)),
            label TEXT,
            note TEXT,
            marking TEXT NOT NULL,
            part TEXT NOT NULL,
            role TEXT,
            grade TEXT NOT NULL,
            plan TEXT NOT NULL,
            started_utc TEXT NOT NULL,
            ended_utc TEXT,
            state TEXT NOT NULL CHECK (state IN ('open', 'ended', 'interrupted')),
            end TEXT,
            fault TEXT,
            why TEXT,
            verdict TEXT,
            owner TEXT NOT NULL,
            samples BLOB,
            samples_hash TEXT,
            sample_count INTEGER NOT NULL DEFAULT 0
        );
        CREATE INDEX run_started ON run(started_utc);
        CREATE INDEX run_label ON run(label);
        CREATE INDEX run_marking ON run(marking);
        CREATE INDEX run_verdict ON run(verdict);
        CREATE INDEX run_open ON run(state) WHERE state = 'open';

        CREATE TABLE sample_batch (
            run INTEGER NOT NULL REFERENCES run(id),
            number INTEGER NOT NULL,
            samples BLOB NOT NULL,
            PRIMARY KEY (run, number)
        ) WITHOUT ROWID;
        CREATE TABLE event (
            run INTEGER NOT NULL REFERENCES run(id),
            number INTEGER NOT NULL,
            kind TEXT NOT NULL,
            document TEXT NOT NULL,
            PRIMARY KEY (run, number)
        ) WITHOUT ROWID;
        CREATE TABLE outcome (
            id INTEGER PRIMARY KEY,
            run INTEGER NOT NULL REFERENCES run(id),
            made_utc TEXT NOT NULL,
            document TEXT NOT NULL
        );
        CREATE INDEX outcome_run ON outcome(run);
        """,
    ),
)

VERSION = len(MIGRATIONS)
