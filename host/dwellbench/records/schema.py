"""Tables, and how an older file becomes a newer one.

A migration is SQL, and where SQL is not enough a function, that run in one transaction together with the row that records it and
the new `user_version`. Files of a newer version are refused; before an older one is changed, a copy is made beside it. A migration
that was released is never changed: a file that went through it would differ from one that is made new.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Callable

from dwellbench.records.digest import fill_digests
from dwellbench.records.folding import fill_search

# "DWLB" in ASCII: whose file this is (SQLite's application_id).
APPLICATION_ID = 0x44574C42

Fill = Callable[[sqlite3.Connection], None]


def _fill_2(connection: sqlite3.Connection) -> None:
    fill_search(connection)
    fill_digests(connection)


MIGRATIONS: tuple[tuple[str, str, Fill | None], ...] = (
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
        None,
    ),
    (
        "samples beside the run instead of in it, so that lists stay quick; several notes; digests that show damage;"
        " a search that knows no difference of case or of micro signs",
        """
        CREATE TABLE trace (
            run INTEGER PRIMARY KEY REFERENCES run(id),
            samples BLOB NOT NULL,
            hash TEXT NOT NULL
        );
        INSERT INTO trace SELECT id, samples, samples_hash FROM run WHERE samples IS NOT NULL;
        ALTER TABLE run DROP COLUMN samples;
        ALTER TABLE run DROP COLUMN samples_hash;

        CREATE TABLE note (
            id INTEGER PRIMARY KEY,
            run INTEGER NOT NULL REFERENCES run(id),
            made_utc TEXT NOT NULL,
            document TEXT NOT NULL,
            search TEXT NOT NULL DEFAULT '',
            digest TEXT
        );
        CREATE INDEX note_run ON note(run);
        INSERT INTO note (run, made_utc, document) SELECT id, started_utc, note FROM run WHERE note IS NOT NULL ORDER BY id;
        ALTER TABLE run DROP COLUMN note;

        ALTER TABLE run ADD COLUMN search TEXT NOT NULL DEFAULT '';
        ALTER TABLE run ADD COLUMN digest TEXT;
        ALTER TABLE outcome ADD COLUMN digest TEXT;
        CREATE INDEX run_search ON run(search);
        """,
        _fill_2,
    ),
)

VERSION = len(MIGRATIONS)
