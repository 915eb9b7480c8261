-- Releases of drawings: what was decided for each feature of a part, with the files that go with the drawing.

CREATE TABLE kept.releases (
    "id" INTEGER PRIMARY KEY, "drawing" VARCHAR NOT NULL, "issue" VARCHAR NOT NULL,
    "drawing_key" VARCHAR NOT NULL, "issue_key" VARCHAR NOT NULL, "part" VARCHAR NOT NULL,
    "study_id" INTEGER NOT NULL, "revision_id" INTEGER NOT NULL, "geometry" VARCHAR NOT NULL,
    "title" VARCHAR NOT NULL, "reason" VARCHAR NOT NULL, "by_whom" VARCHAR NOT NULL, "created" TIMESTAMP NOT NULL,
    "supersedes" INTEGER, "supersedes_hash" VARCHAR, "uncovered" JSON NOT NULL, "warnings" JSON NOT NULL,
    "facts" JSON NOT NULL, "result_hash" VARCHAR, "version" VARCHAR NOT NULL, "record_hash" VARCHAR NOT NULL,
    "files_hash" VARCHAR NOT NULL, UNIQUE (drawing_key, issue_key)
);
COMMENT ON TABLE kept.releases IS 'One issue of one drawing; a row never changes, a later issue is a new row';
COMMENT ON COLUMN kept.releases."id" IS 'number of the release';
COMMENT ON COLUMN kept.releases."drawing" IS 'drawing number as given';
COMMENT ON COLUMN kept.releases."issue" IS 'issue of the drawing as given';
COMMENT ON COLUMN kept.releases."drawing_key" IS 'drawing number by which it is found: case does not count';
COMMENT ON COLUMN kept.releases."issue_key" IS 'issue by which it is found: case does not count';
COMMENT ON COLUMN kept.releases."part" IS 'part that the drawing is of';
COMMENT ON COLUMN kept.releases."study_id" IS 'study behind it';
COMMENT ON COLUMN kept.releases."revision_id" IS 'revision of the geometry that was studied';
COMMENT ON COLUMN kept.releases."geometry" IS 'that revision as NAME@REVISION';
COMMENT ON COLUMN kept.releases."title" IS 'title of the study';
COMMENT ON COLUMN kept.releases."reason" IS 'why this issue was made; what is said of one feature stands with it';
COMMENT ON COLUMN kept.releases."by_whom" IS 'who released it';
COMMENT ON COLUMN kept.releases."created" IS 'when, UTC';
COMMENT ON COLUMN kept.releases."supersedes" IS 'release of the same drawing that this one took the place of';
COMMENT ON COLUMN kept.releases."supersedes_hash" IS 'its record_hash';
COMMENT ON COLUMN kept.releases."uncovered" IS 'features of the part that the study held perfect, a list of PART.FEATURE';
COMMENT ON COLUMN kept.releases."warnings" IS 'what the note warns of, a list of texts';
COMMENT ON COLUMN kept.releases."facts" IS 'the study in figures: method, builds, seed, stage, share of good builds (0 to 1)';
COMMENT ON COLUMN kept.releases."result_hash" IS 'sha256 (hex) over the result tables of the study';
COMMENT ON COLUMN kept.releases."version" IS 'version of the program that released it';
COMMENT ON COLUMN kept.releases."record_hash" IS 'sha256 (hex) over this row and its release_rows';
COMMENT ON COLUMN kept.releases."files_hash" IS 'sha256 (hex) of the manifest, which holds that of every other file';

CREATE TABLE kept.release_rows (
    "release_id" INTEGER NOT NULL, "place" INTEGER NOT NULL, "feature" VARCHAR NOT NULL, "name" VARCHAR NOT NULL,
    "shop_name" VARCHAR, "kind" VARCHAR NOT NULL, "x_mm" DOUBLE, "y_mm" DOUBLE, "z_mm" DOUBLE,
    "right_x_mm" DOUBLE, "right_y_mm" DOUBLE, "right_z_mm" DOUBLE, "length_mm" DOUBLE, "right_length_mm" DOUBLE,
    "form" VARCHAR NOT NULL, "half" DOUBLE[] NOT NULL, "axis" DOUBLE[], "zone" VARCHAR NOT NULL,
    "callout" VARCHAR NOT NULL, "datums" VARCHAR NOT NULL, "distribution" VARCHAR NOT NULL, "process" VARCHAR,
    "condition" VARCHAR NOT NULL, "checked" VARCHAR NOT NULL, "verdict" VARCHAR, "figures" VARCHAR NOT NULL,
    "evidence" JSON NOT NULL, "remark" VARCHAR NOT NULL, "reason" VARCHAR NOT NULL,
    PRIMARY KEY (release_id, place)
);
COMMENT ON TABLE kept.release_rows IS 'One released feature: its tolerance, how it is made and checked, and why; a row never changes';
COMMENT ON COLUMN kept.release_rows."release_id" IS 'release';
COMMENT ON COLUMN kept.release_rows."place" IS '1, 2, 3 ... as on the note';
COMMENT ON COLUMN kept.release_rows."feature" IS 'PART.FEATURE';
COMMENT ON COLUMN kept.release_rows."name" IS 'the feature in words';
COMMENT ON COLUMN kept.release_rows."shop_name" IS 'the shop''s own name of the point, where it differs';
COMMENT ON COLUMN kept.release_rows."kind" IS 'point | length | angles | jig';
COMMENT ON COLUMN kept.release_rows."x_mm" IS 'true position of the left side, mm forward';
COMMENT ON COLUMN kept.release_rows."y_mm" IS 'mm to the left of the centre plane';
COMMENT ON COLUMN kept.release_rows."z_mm" IS 'mm up';
COMMENT ON COLUMN kept.release_rows."right_x_mm" IS 'true position of the right side where it is no mirror image, mm forward';
COMMENT ON COLUMN kept.release_rows."right_y_mm" IS 'mm to the left of the centre plane';
COMMENT ON COLUMN kept.release_rows."right_z_mm" IS 'mm up';
COMMENT ON COLUMN kept.release_rows."length_mm" IS 'true length, mm; NULL for what is no length';
COMMENT ON COLUMN kept.release_rows."right_length_mm" IS 'that of the right side where it differs, mm';
COMMENT ON COLUMN kept.release_rows."form" IS 'box | ball | cylinder | length | tilt';
COMMENT ON COLUMN kept.release_rows."half" IS
    'half widths: box x, y, z (mm; degrees for the turn of a jig); ball radius; cylinder radius, +- along its axis; length +-; tilt half angle (degrees)';
COMMENT ON COLUMN kept.release_rows."axis" IS 'unit vector of a cylinder';
COMMENT ON COLUMN kept.release_rows."zone" IS 'the zone in words';
COMMENT ON COLUMN kept.release_rows."callout" IS 'the tolerance as it stands on the drawing';
COMMENT ON COLUMN kept.release_rows."datums" IS 'what it is measured from';
COMMENT ON COLUMN kept.release_rows."distribution" IS 'law of the errors that the study drew';
COMMENT ON COLUMN kept.release_rows."process" IS 'process that the zone was taken from, where one is named';
COMMENT ON COLUMN kept.release_rows."condition" IS 'condition in which it holds: welded, unpainted ...';
COMMENT ON COLUMN kept.release_rows."checked" IS 'how it is checked';
COMMENT ON COLUMN kept.release_rows."verdict" IS 'hold | watch | open; NULL without limits';
COMMENT ON COLUMN kept.release_rows."figures" IS 'the figures behind it, in words';
COMMENT ON COLUMN kept.release_rows."evidence" IS 'the figures behind it: rank and share in every measure, and what became of the good share when it alone was loosened';
COMMENT ON COLUMN kept.release_rows."remark" IS 'what else has to be known of it';
COMMENT ON COLUMN kept.release_rows."reason" IS 'why it was released so';

CREATE TABLE kept.release_files (
    "release_id" INTEGER NOT NULL, "path" VARCHAR NOT NULL, "sha256" VARCHAR NOT NULL, "bytes" BIGINT NOT NULL,
    PRIMARY KEY (release_id, path)
);
COMMENT ON TABLE kept.release_files IS 'Files that were handed out with a release';
COMMENT ON COLUMN kept.release_files."release_id" IS 'release';
COMMENT ON COLUMN kept.release_files."path" IS 'path inside the folder';
COMMENT ON COLUMN kept.release_files."sha256" IS 'hex digest of its content';
COMMENT ON COLUMN kept.release_files."bytes" IS 'size';

CREATE TABLE kept.release_contents (
    "sha256" VARCHAR PRIMARY KEY, "content" BLOB NOT NULL
);
COMMENT ON TABLE kept.release_contents IS 'Contents of released files, each kept once';
COMMENT ON COLUMN kept.release_contents."sha256" IS 'hex digest';
COMMENT ON COLUMN kept.release_contents."content" IS 'the bytes';
