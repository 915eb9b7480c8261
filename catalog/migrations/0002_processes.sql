-- Processes: named rows of zone, law and cost; and what the processes of a queued study stood for.

CREATE TABLE kept.processes (
    "id" INTEGER PRIMARY KEY, "name" VARCHAR NOT NULL, "version" INTEGER NOT NULL, "zone" JSON,
    "distribution" VARCHAR NOT NULL, "cp" DOUBLE NOT NULL, "truncated" BOOLEAN NOT NULL,
    "jig_cost" DOUBLE NOT NULL, "piece_cost" DOUBLE NOT NULL, "looser" VARCHAR, "source" VARCHAR NOT NULL,
    "remark" VARCHAR NOT NULL, "created" TIMESTAMP NOT NULL, "by_whom" VARCHAR NOT NULL, "retired" TIMESTAMP,
    "retired_by" VARCHAR,
    UNIQUE (name, version)
);
COMMENT ON TABLE kept.processes IS 'Ways of making a feature; a row never changes but for being retired';
COMMENT ON COLUMN kept.processes."id" IS 'number of the row';
COMMENT ON COLUMN kept.processes."name" IS 'name, as study files write it';
COMMENT ON COLUMN kept.processes."version" IS '1, 2, 3 ... within the name; the newest is in force unless retired';
COMMENT ON COLUMN kept.processes."zone" IS 'keys of the zone as in a study file (mm, deg); NULL where it goes by nominal dimension';
COMMENT ON COLUMN kept.processes."distribution" IS 'uniform | normal';
COMMENT ON COLUMN kept.processes."cp" IS 'of a normal distribution: 1 leaves 99.73 % inside the zone';
COMMENT ON COLUMN kept.processes."truncated" IS 'whether what lies outside the zone is rejected';
COMMENT ON COLUMN kept.processes."jig_cost" IS 'cost once, whatever the number of pieces; the shop''s own unit';
COMMENT ON COLUMN kept.processes."piece_cost" IS 'cost of each piece, in the same unit';
COMMENT ON COLUMN kept.processes."looser" IS 'name of the next looser process';
COMMENT ON COLUMN kept.processes."source" IS 'where the zone comes from';
COMMENT ON COLUMN kept.processes."remark" IS 'free text';
COMMENT ON COLUMN kept.processes."created" IS 'when added, UTC';
COMMENT ON COLUMN kept.processes."by_whom" IS 'who added it';
COMMENT ON COLUMN kept.processes."retired" IS 'since when it is not in force any more, UTC';
COMMENT ON COLUMN kept.processes."retired_by" IS 'who retired it';

CREATE TABLE kept.process_ranges (
    "process_id" INTEGER NOT NULL, "from_mm" DOUBLE NOT NULL, "from_included" BOOLEAN NOT NULL,
    "up_to_mm" DOUBLE NOT NULL, "zone" JSON NOT NULL
);
COMMENT ON TABLE kept.process_ranges IS 'Zones of the processes that go by nominal dimension';
COMMENT ON COLUMN kept.process_ranges."process_id" IS 'row of the process';
COMMENT ON COLUMN kept.process_ranges."from_mm" IS 'lower edge of the range of nominal dimensions, mm';
COMMENT ON COLUMN kept.process_ranges."from_included" IS 'whether the lower edge belongs to it: only where a table begins';
COMMENT ON COLUMN kept.process_ranges."up_to_mm" IS 'upper edge, mm; it belongs to the range';
COMMENT ON COLUMN kept.process_ranges."zone" IS 'keys of the zone as in a study file, mm';

CREATE TABLE kept.study_processes (
    "study_id" INTEGER NOT NULL, "asked" VARCHAR NOT NULL, "process" VARCHAR NOT NULL, "version" INTEGER,
    "zone" JSON NOT NULL, "looser" VARCHAR
);
COMMENT ON TABLE kept.study_processes IS 'What the processes of a study, and the looser ones above them, stood for when it was queued';
COMMENT ON COLUMN kept.study_processes."study_id" IS 'study';
COMMENT ON COLUMN kept.study_processes."asked" IS 'process as the study file writes it: NAME or NAME@NOMINAL';
COMMENT ON COLUMN kept.study_processes."process" IS 'name of the process';
COMMENT ON COLUMN kept.study_processes."version" IS 'version that was in force';
COMMENT ON COLUMN kept.study_processes."zone" IS 'keys of zone and law as in a study file, mm and deg';
COMMENT ON COLUMN kept.study_processes."looser" IS 'next looser process, written like asked';
