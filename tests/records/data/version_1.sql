-- Records of version 1 as its program wrote them: an ended run, an interrupted one, and one left open by a killed program.
PRAGMA application_id = 1146571842;
PRAGMA user_version = 1;
BEGIN TRANSACTION;
CREATE TABLE box (
            id INTEGER PRIMARY KEY,
            unique_id TEXT NOT NULL UNIQUE,
            model TEXT NOT NULL,
            first_seen_utc TEXT NOT NULL
        );
INSERT INTO "box" VALUES(1,'0000000000000000','reference','2026-12-01T12:29:38Z');
INSERT INTO "box" VALUES(2,'1111111111111111','reference','2026-12-01T12:29:38Z');
CREATE TABLE calibration (
            id INTEGER PRIMARY KEY,
            box INTEGER NOT NULL REFERENCES box(id),
            hash TEXT NOT NULL,
            document TEXT NOT NULL,
            first_seen_utc TEXT NOT NULL,
            UNIQUE (box, hash)
        );
INSERT INTO "calibration" VALUES(1,1,'5bfe871b28009715a2c07a423110bf60e814da8c261ceef17900da5fe993d63c','{"id": "abc"}','2026-12-01T12:29:38Z');
INSERT INTO "calibration" VALUES(2,2,'17bc8bab1da818d5dba0c2b4f518daaec5303c83023fce1a3f51169b604c8e27','{"id": "def"}','2026-12-01T12:29:38Z');
CREATE TABLE event (
            run INTEGER NOT NULL REFERENCES run(id),
            number INTEGER NOT NULL,
            kind TEXT NOT NULL,
            document TEXT NOT NULL,
            PRIMARY KEY (run, number)
        ) WITHOUT ROWID;
INSERT INTO "event" VALUES(1,0,'state','{"state": "dwell", "t": 2000, "why": ""}');
INSERT INTO "event" VALUES(3,0,'fault','{"fault": "stop", "t": 1}');
CREATE TABLE migration (version INTEGER PRIMARY KEY, what TEXT NOT NULL, made_utc TEXT NOT NULL);
INSERT INTO "migration" VALUES(1,'runs as they are written, their samples, events and outcomes; boxes and calibrations','2026-12-01T12:29:38Z');
CREATE TABLE outcome (
            id INTEGER PRIMARY KEY,
            run INTEGER NOT NULL REFERENCES run(id),
            made_utc TEXT NOT NULL,
            document TEXT NOT NULL
        );
INSERT INTO "outcome" VALUES(1,1,'2026-12-01T12:29:38Z','{"verdict": "fit", "reason": "because", "findings": []}');
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
INSERT INTO "run" VALUES(1,'key',1,1,'0.1.0','00000000',1,'drawer 3/A','0.1µF, from the “grey” set','47n 630V film','{"marking": "47n 630V film"}','coupling','new','{"volts_V": 630.0}','2026-01-05T10:00:00Z','2026-01-05T10:02:00Z','ended','complete',NULL,NULL,'fit','pid 1',X'726F773139000000789C63606060601CE61804528639666318FE8091B09251300480D0403B800E60470DD380977BB4C61ACAD40BAFC10A7A46801F4506DA017400E7FEFFFF3FD0F985D6F81BD08FD40BB1C109B806DA01A3802AC0417EA05D407BD06037D02E1805A3803800008FE621CB','3565277469111706ab59822829720439f0eb71e21c93bb1278c8dcdec649b899',57);
INSERT INTO "run" VALUES(2,'key',1,NULL,'0.1.0','00000000',1,NULL,NULL,'47n 630V film','{"marking": "47n 630V film"}','coupling','new','{"volts_V": 630.0}','2026-01-05T11:00:00Z','2026-01-05T10:02:00Z','interrupted',NULL,NULL,'stopped by the user',NULL,'pid 1',X'726F773100000000789C030000000001','e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855',0);
INSERT INTO "run" VALUES(3,'key',2,2,'0.1.0','00000000',1,NULL,NULL,'47n 630V film','{"marking": "47n 630V film"}','coupling','new','{"volts_V": 630.0}','2026-01-05T12:00:00Z',NULL,'open',NULL,NULL,NULL,NULL,'pid 1',NULL,NULL,0);
CREATE TABLE sample_batch (
            run INTEGER NOT NULL REFERENCES run(id),
            number INTEGER NOT NULL,
            samples BLOB NOT NULL,
            PRIMARY KEY (run, number)
        ) WITHOUT ROWID;
INSERT INTO "sample_batch" VALUES(3,0,X'726F773114000000789C6360606060A4220681142A623606EA0246C24A06140851D9BC1D354C548D5F0D65EABAAF87CAE68950D7388673FFFFFFA766F87D039A474DF77151D3301A000779EA9AD760475DF3063B0000C7EF12E8');
CREATE INDEX run_started ON run(started_utc);
CREATE INDEX run_label ON run(label);
CREATE INDEX run_marking ON run(marking);
CREATE INDEX run_verdict ON run(verdict);
CREATE INDEX run_open ON run(state) WHERE state = 'open';
CREATE INDEX outcome_run ON outcome(run);
COMMIT;
