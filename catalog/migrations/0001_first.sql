-- First schema. Tables stand in schema `kept`; the public views (views.sql) have the plain names.
-- All times are UTC; angles are degrees, lengths mm unless a column says otherwise.

CREATE SCHEMA IF NOT EXISTS kept;
CREATE TYPE kept.study_state AS ENUM ('queued', 'running', 'done', 'failed', 'cancelled');

CREATE TABLE kept.schema_migrations (
    "version" INTEGER PRIMARY KEY, "name" VARCHAR NOT NULL, "applied_at" TIMESTAMP NOT NULL,
    "program" VARCHAR NOT NULL
);
COMMENT ON TABLE kept.schema_migrations IS 'Which numbered migrations made this file';
COMMENT ON COLUMN kept.schema_migrations."version" IS 'number of the migration';
COMMENT ON COLUMN kept.schema_migrations."name" IS 'file name of the migration';
COMMENT ON COLUMN kept.schema_migrations."applied_at" IS 'when, UTC';
COMMENT ON COLUMN kept.schema_migrations."program" IS 'version of the program that applied it';

CREATE TABLE kept.schema_views (
    "sha256" VARCHAR NOT NULL
);
COMMENT ON TABLE kept.schema_views IS 'One row: which text of the public views stands in this file';
COMMENT ON COLUMN kept.schema_views."sha256" IS 'hex digest of views.sql';

CREATE TABLE kept.geometries (
    "id" INTEGER PRIMARY KEY, "name" VARCHAR NOT NULL UNIQUE
);
COMMENT ON TABLE kept.geometries IS 'Names of geometries; what they are stands in their revisions';
COMMENT ON COLUMN kept.geometries."id" IS 'number of the geometry';
COMMENT ON COLUMN kept.geometries."name" IS 'name, as in its file';

CREATE TABLE kept.revisions (
    "id" INTEGER PRIMARY KEY, "geometry_id" INTEGER NOT NULL REFERENCES kept.geometries (id),
    "number" INTEGER NOT NULL, "content_hash" VARCHAR NOT NULL, "linkage" VARCHAR NOT NULL,
    "axle" VARCHAR NOT NULL, "given_axes" VARCHAR NOT NULL, "given_units" VARCHAR NOT NULL,
    "given_side" VARCHAR NOT NULL, "note" VARCHAR NOT NULL, "created" TIMESTAMP NOT NULL,
    "by_whom" VARCHAR NOT NULL, "why" VARCHAR NOT NULL, "text" VARCHAR NOT NULL, "record" JSON NOT NULL,
    UNIQUE (geometry_id, number), UNIQUE (geometry_id, content_hash)
);
COMMENT ON TABLE kept.revisions IS 'Registered revisions of geometries; a row never changes';
COMMENT ON COLUMN kept.revisions."id" IS 'number over all geometries';
COMMENT ON COLUMN kept.revisions."geometry_id" IS 'geometry';
COMMENT ON COLUMN kept.revisions."number" IS '1, 2, 3 ... within the geometry';
COMMENT ON COLUMN kept.revisions."content_hash" IS 'sha256 (hex) over the canonical record; unique within the geometry';
COMMENT ON COLUMN kept.revisions."linkage" IS 'kind of linkage';
COMMENT ON COLUMN kept.revisions."axle" IS 'front | rear';
COMMENT ON COLUMN kept.revisions."given_axes" IS 'axes of the given file; the record itself is in ISO 8855 axes';
COMMENT ON COLUMN kept.revisions."given_units" IS 'length unit of the given file (mm | m | in); the record itself is in mm';
COMMENT ON COLUMN kept.revisions."given_side" IS 'side the file describes: left | right';
COMMENT ON COLUMN kept.revisions."note" IS 'free text of the file';
COMMENT ON COLUMN kept.revisions."created" IS 'when registered, UTC';
COMMENT ON COLUMN kept.revisions."by_whom" IS 'who registered it';
COMMENT ON COLUMN kept.revisions."why" IS 'why it was changed';
COMMENT ON COLUMN kept.revisions."text" IS 'the file as it was given';
COMMENT ON COLUMN kept.revisions."record" IS 'validated content: ISO axes, mm, degrees, car coordinates';

CREATE TABLE kept.points (
    "revision_id" INTEGER NOT NULL, "side" VARCHAR NOT NULL, "point" VARCHAR NOT NULL,
    "x_mm" DOUBLE NOT NULL, "y_mm" DOUBLE NOT NULL, "z_mm" DOUBLE NOT NULL
);
COMMENT ON TABLE kept.points IS 'Points and wheel centres of every revision at design';
COMMENT ON COLUMN kept.points."revision_id" IS 'revision';
COMMENT ON COLUMN kept.points."side" IS 'left | right';
COMMENT ON COLUMN kept.points."point" IS 'name of the point; wheel_centre for the wheel';
COMMENT ON COLUMN kept.points."x_mm" IS 'mm, forward';
COMMENT ON COLUMN kept.points."y_mm" IS 'mm, to the left of the centre plane';
COMMENT ON COLUMN kept.points."z_mm" IS 'mm, up';

CREATE TABLE kept.revision_measures (
    "revision_id" INTEGER NOT NULL, "side" VARCHAR NOT NULL, "key" VARCHAR NOT NULL, "value" DOUBLE,
    "unit" VARCHAR NOT NULL
);
COMMENT ON TABLE kept.revision_measures IS 'Measures of every revision at design';
COMMENT ON COLUMN kept.revision_measures."revision_id" IS 'revision';
COMMENT ON COLUMN kept.revision_measures."side" IS 'left | right | axle';
COMMENT ON COLUMN kept.revision_measures."key" IS 'key of the measure';
COMMENT ON COLUMN kept.revision_measures."value" IS 'value in its unit; NULL where undefined';
COMMENT ON COLUMN kept.revision_measures."unit" IS 'unit of the value; 1 for a plain ratio';

CREATE TABLE kept.studies (
    "id" INTEGER PRIMARY KEY, "title" VARCHAR NOT NULL, "state" kept.study_state NOT NULL,
    "method" VARCHAR NOT NULL, "size" BIGINT NOT NULL, "seed" BIGINT NOT NULL, "sides" VARCHAR NOT NULL,
    "revision_id" INTEGER NOT NULL, "text" VARCHAR NOT NULL, "version" VARCHAR NOT NULL,
    "created" TIMESTAMP NOT NULL, "by_whom" VARCHAR NOT NULL, "worker" VARCHAR, "heartbeat" TIMESTAMP,
    "started" TIMESTAMP, "finished" TIMESTAMP, "done_builds" BIGINT NOT NULL DEFAULT 0,
    "total_builds" BIGINT, "error" VARCHAR, "result_hash" VARCHAR, "final_stage" VARCHAR,
    "ranked" BOOLEAN NOT NULL DEFAULT false
);
COMMENT ON TABLE kept.studies IS 'Queued, running and finished studies; a finished one never changes';
COMMENT ON COLUMN kept.studies."id" IS 'number of the study';
COMMENT ON COLUMN kept.studies."title" IS 'title in the study file';
COMMENT ON COLUMN kept.studies."state" IS 'queued | running | done | failed | cancelled';
COMMENT ON COLUMN kept.studies."method" IS 'linear | morris | sobol | spread | worst';
COMMENT ON COLUMN kept.studies."size" IS 'base sample, trajectories or builds, as the method counts';
COMMENT ON COLUMN kept.studies."seed" IS 'seed of all draws';
COMMENT ON COLUMN kept.studies."sides" IS 'mirrored | independent';
COMMENT ON COLUMN kept.studies."revision_id" IS 'revision of the geometry that is studied';
COMMENT ON COLUMN kept.studies."text" IS 'the study file as it was given';
COMMENT ON COLUMN kept.studies."version" IS 'version of the program that queued it';
COMMENT ON COLUMN kept.studies."created" IS 'when queued, UTC';
COMMENT ON COLUMN kept.studies."by_whom" IS 'who queued it';
COMMENT ON COLUMN kept.studies."worker" IS 'worker that has claimed it: host:process:token';
COMMENT ON COLUMN kept.studies."heartbeat" IS 'last sign of life of the worker, UTC';
COMMENT ON COLUMN kept.studies."started" IS 'first claim, UTC';
COMMENT ON COLUMN kept.studies."finished" IS 'end, whatever its outcome, UTC';
COMMENT ON COLUMN kept.studies."done_builds" IS 'builds finished so far';
COMMENT ON COLUMN kept.studies."total_builds" IS 'builds to run; NULL until known';
COMMENT ON COLUMN kept.studies."error" IS 'why it failed';
COMMENT ON COLUMN kept.studies."result_hash" IS 'sha256 (hex) over the result tables';
COMMENT ON COLUMN kept.studies."final_stage" IS 'stage at which the answer is read: after, or before where nothing is re-set';
COMMENT ON COLUMN kept.studies."ranked" IS 'whether the result holds a ranking';

CREATE TABLE kept.chunks (
    "study_id" INTEGER, "stage" VARCHAR, "chunk_no" INTEGER, "first_build" BIGINT NOT NULL,
    "n_builds" BIGINT NOT NULL, "seconds" DOUBLE, "hash" VARCHAR NOT NULL,
    PRIMARY KEY (study_id, stage, chunk_no)
);
COMMENT ON TABLE kept.chunks IS 'Chunks of builds that are finished and kept';
COMMENT ON COLUMN kept.chunks."study_id" IS 'study';
COMMENT ON COLUMN kept.chunks."stage" IS 'before | after';
COMMENT ON COLUMN kept.chunks."chunk_no" IS '0, 1, 2 ... within study and stage';
COMMENT ON COLUMN kept.chunks."first_build" IS 'number of its first build';
COMMENT ON COLUMN kept.chunks."n_builds" IS 'how many builds';
COMMENT ON COLUMN kept.chunks."seconds" IS 'time taken, s';
COMMENT ON COLUMN kept.chunks."hash" IS 'sha256 (hex) over its values';

CREATE TABLE kept.build_values (
    "study_id" INTEGER NOT NULL, "stage" VARCHAR NOT NULL, "chunk_no" INTEGER NOT NULL,
    "kind" VARCHAR NOT NULL, "measure_no" INTEGER NOT NULL, "build_no" BIGINT NOT NULL, "value" DOUBLE
);
COMMENT ON TABLE kept.build_values IS 'One value of one build; no key, for size and speed';
COMMENT ON COLUMN kept.build_values."study_id" IS 'study';
COMMENT ON COLUMN kept.build_values."stage" IS 'before | after';
COMMENT ON COLUMN kept.build_values."chunk_no" IS 'chunk it came with';
COMMENT ON COLUMN kept.build_values."kind" IS 'value (a measure), or another array of the study such as demand (mm or deg)';
COMMENT ON COLUMN kept.build_values."measure_no" IS 'row of the array: 0, 1, 2 ... as in the study file';
COMMENT ON COLUMN kept.build_values."build_no" IS 'number of the build from 0';
COMMENT ON COLUMN kept.build_values."value" IS 'in the unit of the measure; NULL where there is none';

CREATE TABLE kept.builds (
    "study_id" INTEGER NOT NULL, "stage" VARCHAR NOT NULL, "chunk_no" INTEGER NOT NULL,
    "build_no" BIGINT NOT NULL, "status" UTINYINT NOT NULL
);
COMMENT ON TABLE kept.builds IS 'Outcome of each build; no key, for size and speed';
COMMENT ON COLUMN kept.builds."study_id" IS 'study';
COMMENT ON COLUMN kept.builds."stage" IS 'before | after';
COMMENT ON COLUMN kept.builds."chunk_no" IS 'chunk it came with';
COMMENT ON COLUMN kept.builds."build_no" IS 'number of the build from 0';
COMMENT ON COLUMN kept.builds."status" IS '0: assembled; else why it was not';

CREATE TABLE kept.study_facts (
    "study_id" INTEGER NOT NULL, "builds" JSON, "dropped_blocks" JSON, "withheld" JSON, "unassembled" JSON,
    "perfect" JSON, "notes" JSON, "seconds" JSON, "good_share" DOUBLE, "good_low" DOUBLE,
    "good_high" DOUBLE, "all_cars" DOUBLE, "version" VARCHAR, "stages" JSON
);
COMMENT ON TABLE kept.study_facts IS 'What is said of a finished study beside its tables';
COMMENT ON COLUMN kept.study_facts."study_id" IS 'study';
COMMENT ON COLUMN kept.study_facts."builds" IS 'builds really run';
COMMENT ON COLUMN kept.study_facts."dropped_blocks" IS 'sample blocks dropped for a build without value';
COMMENT ON COLUMN kept.study_facts."withheld" IS 'whether indices are withheld because too many builds could not be assembled';
COMMENT ON COLUMN kept.study_facts."unassembled" IS 'builds that could not be assembled';
COMMENT ON COLUMN kept.study_facts."perfect" IS 'features held perfect: no error is given for them';
COMMENT ON COLUMN kept.study_facts."notes" IS 'remarks, a list of texts';
COMMENT ON COLUMN kept.study_facts."seconds" IS 'time taken, s';
COMMENT ON COLUMN kept.study_facts."good_share" IS 'share of all builds inside all limits, 0 to 1';
COMMENT ON COLUMN kept.study_facts."good_low" IS 'lower 95 % bound of good_share';
COMMENT ON COLUMN kept.study_facts."good_high" IS 'upper 95 % bound of good_share';
COMMENT ON COLUMN kept.study_facts."all_cars" IS 'chance that all of the stated number of cars are inside all limits, 0 to 1';
COMMENT ON COLUMN kept.study_facts."version" IS 'version of the program that ran it';
COMMENT ON COLUMN kept.study_facts."stages" IS 'stages that were run';

CREATE TABLE kept.ranking (
    "study_id" INTEGER NOT NULL, "stage" VARCHAR, "measure_no" INTEGER, "measure" VARCHAR, "unit" VARCHAR,
    "source" VARCHAR, "rank" INTEGER, "st" DOUBLE, "st_low" DOUBLE, "st_high" DOUBLE, "s1" DOUBLE,
    "s1_low" DOUBLE, "s1_high" DOUBLE, "linear_share" DOUBLE, "mu_star" DOUBLE, "mu_star_low" DOUBLE,
    "mu_star_high" DOUBLE, "effect" DOUBLE[], "effect_axes" VARCHAR[], "effect_unit" VARCHAR,
    "effect_per_mm" DOUBLE, "tied" BOOLEAN, "verdict" VARCHAR
);
COMMENT ON TABLE kept.ranking IS 'What each error source does to each measure';
COMMENT ON COLUMN kept.ranking."study_id" IS 'study';
COMMENT ON COLUMN kept.ranking."stage" IS 'before | after alignment';
COMMENT ON COLUMN kept.ranking."measure_no" IS '0, 1, 2 ... as in the study file';
COMMENT ON COLUMN kept.ranking."measure" IS 'name of the measure';
COMMENT ON COLUMN kept.ranking."unit" IS 'unit of the measure';
COMMENT ON COLUMN kept.ranking."source" IS 'PART.FEATURE';
COMMENT ON COLUMN kept.ranking."rank" IS '1 is the strongest';
COMMENT ON COLUMN kept.ranking."st" IS 'total share of variance, 0 to 1';
COMMENT ON COLUMN kept.ranking."st_low" IS 'lower 95 % bound of st';
COMMENT ON COLUMN kept.ranking."st_high" IS 'upper 95 % bound of st';
COMMENT ON COLUMN kept.ranking."s1" IS 'share of variance by itself, 0 to 1';
COMMENT ON COLUMN kept.ranking."s1_low" IS 'lower 95 % bound of s1';
COMMENT ON COLUMN kept.ranking."s1_high" IS 'upper 95 % bound of s1';
COMMENT ON COLUMN kept.ranking."linear_share" IS 'share of variance by the linear model, 0 to 1';
COMMENT ON COLUMN kept.ranking."mu_star" IS 'mean absolute elementary effect, unit of the measure';
COMMENT ON COLUMN kept.ranking."mu_star_low" IS 'lower 95 % bound of mu_star';
COMMENT ON COLUMN kept.ranking."mu_star_high" IS 'upper 95 % bound of mu_star';
COMMENT ON COLUMN kept.ranking."effect" IS 'signed effect of each scalar, unit of the measure per effect_unit';
COMMENT ON COLUMN kept.ranking."effect_axes" IS 'x, y, z | length | tilt_1, tilt_2';
COMMENT ON COLUMN kept.ranking."effect_unit" IS 'per mm or per deg';
COMMENT ON COLUMN kept.ranking."effect_per_mm" IS 'length of effect, unit of the measure per mm or deg';
COMMENT ON COLUMN kept.ranking."tied" IS 'not told apart from the one ranked just above';
COMMENT ON COLUMN kept.ranking."verdict" IS 'hold | watch | open; NULL without limits';

CREATE TABLE kept.stats (
    "study_id" INTEGER NOT NULL, "stage" VARCHAR, "measure_no" INTEGER, "measure" VARCHAR, "of" VARCHAR,
    "unit" VARCHAR, "side" VARCHAR, "position" JSON, "nominal" DOUBLE, "mean" DOUBLE, "sd" DOUBLE,
    "low" DOUBLE, "high" DOUBLE, "q005" DOUBLE, "q025" DOUBLE, "q05" DOUBLE, "q25" DOUBLE, "q50" DOUBLE,
    "q75" DOUBLE, "q95" DOUBLE, "q975" DOUBLE, "q995" DOUBLE, "limit_low" DOUBLE, "limit_high" DOUBLE,
    "good_share" DOUBLE, "good_low" DOUBLE, "good_high" DOUBLE, "builds" BIGINT, "unassembled" BIGINT,
    "rss" DOUBLE, "worst_low" DOUBLE, "worst_high" DOUBLE
);
COMMENT ON TABLE kept.stats IS 'Distribution of each measure over the builds';
COMMENT ON COLUMN kept.stats."study_id" IS 'study';
COMMENT ON COLUMN kept.stats."stage" IS 'before | after alignment';
COMMENT ON COLUMN kept.stats."measure_no" IS '0, 1, 2 ... as in the study file';
COMMENT ON COLUMN kept.stats."measure" IS 'name of the measure';
COMMENT ON COLUMN kept.stats."of" IS 'key of the measure';
COMMENT ON COLUMN kept.stats."unit" IS 'unit of the measure';
COMMENT ON COLUMN kept.stats."side" IS 'left | right | axle';
COMMENT ON COLUMN kept.stats."position" IS 'position or sweep at which it is taken (mm, deg)';
COMMENT ON COLUMN kept.stats."nominal" IS 'value of the drawing, unit of the measure';
COMMENT ON COLUMN kept.stats."mean" IS 'unit of the measure';
COMMENT ON COLUMN kept.stats."sd" IS 'standard deviation, unit of the measure';
COMMENT ON COLUMN kept.stats."low" IS 'least value, unit of the measure';
COMMENT ON COLUMN kept.stats."high" IS 'greatest value, unit of the measure';
COMMENT ON COLUMN kept.stats."q005" IS 'quantile 0.005, unit of the measure';
COMMENT ON COLUMN kept.stats."q025" IS 'quantile 0.025, unit of the measure';
COMMENT ON COLUMN kept.stats."q05" IS 'quantile 0.05, unit of the measure';
COMMENT ON COLUMN kept.stats."q25" IS 'quantile 0.25, unit of the measure';
COMMENT ON COLUMN kept.stats."q50" IS 'quantile 0.5, unit of the measure';
COMMENT ON COLUMN kept.stats."q75" IS 'quantile 0.75, unit of the measure';
COMMENT ON COLUMN kept.stats."q95" IS 'quantile 0.95, unit of the measure';
COMMENT ON COLUMN kept.stats."q975" IS 'quantile 0.975, unit of the measure';
COMMENT ON COLUMN kept.stats."q995" IS 'quantile 0.995, unit of the measure';
COMMENT ON COLUMN kept.stats."limit_low" IS 'lower limit, unit of the measure';
COMMENT ON COLUMN kept.stats."limit_high" IS 'upper limit, unit of the measure';
COMMENT ON COLUMN kept.stats."good_share" IS 'share of all builds inside the limits, 0 to 1';
COMMENT ON COLUMN kept.stats."good_low" IS 'lower 95 % bound of good_share';
COMMENT ON COLUMN kept.stats."good_high" IS 'upper 95 % bound of good_share';
COMMENT ON COLUMN kept.stats."builds" IS 'builds run';
COMMENT ON COLUMN kept.stats."unassembled" IS 'builds without value';
COMMENT ON COLUMN kept.stats."rss" IS 'root-sum-square stack, +-, unit of the measure';
COMMENT ON COLUMN kept.stats."worst_low" IS 'lowest value of the worst-case stack of the linear model, unit of the measure';
COMMENT ON COLUMN kept.stats."worst_high" IS 'highest value of the worst-case stack of the linear model, unit of the measure';

CREATE TABLE kept.histogram (
    "study_id" INTEGER NOT NULL, "stage" VARCHAR, "measure_no" INTEGER, "left" DOUBLE, "right" DOUBLE,
    "count" BIGINT
);
COMMENT ON TABLE kept.histogram IS 'Counts of builds by value';
COMMENT ON COLUMN kept.histogram."study_id" IS 'study';
COMMENT ON COLUMN kept.histogram."stage" IS 'before | after alignment';
COMMENT ON COLUMN kept.histogram."measure_no" IS '0, 1, 2 ... as in the study file';
COMMENT ON COLUMN kept.histogram."left" IS 'left edge, unit of the measure';
COMMENT ON COLUMN kept.histogram."right" IS 'right edge, unit of the measure';
COMMENT ON COLUMN kept.histogram."count" IS 'builds in between';

CREATE TABLE kept.curves (
    "study_id" INTEGER NOT NULL, "stage" VARCHAR, "axis" VARCHAR, "x" DOUBLE, "key" VARCHAR, "unit" VARCHAR,
    "side" VARCHAR, "nominal" DOUBLE, "q05" DOUBLE, "q25" DOUBLE, "q50" DOUBLE, "q75" DOUBLE, "q95" DOUBLE
);
COMMENT ON TABLE kept.curves IS 'Measures along a sweep: nominal and quantiles of builds';
COMMENT ON COLUMN kept.curves."study_id" IS 'study';
COMMENT ON COLUMN kept.curves."stage" IS 'before | after alignment';
COMMENT ON COLUMN kept.curves."axis" IS 'bump | roll | rack';
COMMENT ON COLUMN kept.curves."x" IS 'position along the sweep, mm or deg';
COMMENT ON COLUMN kept.curves."key" IS 'key of the measure';
COMMENT ON COLUMN kept.curves."unit" IS 'unit of the measure';
COMMENT ON COLUMN kept.curves."side" IS 'left | right | axle';
COMMENT ON COLUMN kept.curves."nominal" IS 'value of the drawing, unit of the measure';
COMMENT ON COLUMN kept.curves."q05" IS 'quantile 0.05, unit of the measure';
COMMENT ON COLUMN kept.curves."q25" IS 'quantile 0.25, unit of the measure';
COMMENT ON COLUMN kept.curves."q50" IS 'quantile 0.5, unit of the measure';
COMMENT ON COLUMN kept.curves."q75" IS 'quantile 0.75, unit of the measure';
COMMENT ON COLUMN kept.curves."q95" IS 'quantile 0.95, unit of the measure';

CREATE TABLE kept.demand (
    "study_id" INTEGER NOT NULL, "adjuster" VARCHAR, "by" VARCHAR, "unit" VARCHAR, "q005" DOUBLE, "q025" DOUBLE,
    "q05" DOUBLE, "q25" DOUBLE, "q50" DOUBLE, "q75" DOUBLE, "q95" DOUBLE, "q975" DOUBLE, "q995" DOUBLE, "low" DOUBLE,
    "high" DOUBLE, "ran_out_share" DOUBLE
);
COMMENT ON TABLE kept.demand IS 'How far the workshop has to move each adjuster';
COMMENT ON COLUMN kept.demand."study_id" IS 'study';
COMMENT ON COLUMN kept.demand."adjuster" IS 'what is set: ride_height, toe, camber, caster';
COMMENT ON COLUMN kept.demand."by" IS 'what it is set by';
COMMENT ON COLUMN kept.demand."unit" IS 'unit of the quantiles, mm or deg';
COMMENT ON COLUMN kept.demand."q005" IS 'quantile 0.005, in unit';
COMMENT ON COLUMN kept.demand."q025" IS '2.5 % quantile, unit of the adjuster';
COMMENT ON COLUMN kept.demand."q975" IS '97.5 % quantile, unit of the adjuster';
COMMENT ON COLUMN kept.demand."q05" IS 'quantile 0.05, in unit';
COMMENT ON COLUMN kept.demand."q25" IS 'quantile 0.25, in unit';
COMMENT ON COLUMN kept.demand."q50" IS 'quantile 0.5, in unit';
COMMENT ON COLUMN kept.demand."q75" IS 'quantile 0.75, in unit';
COMMENT ON COLUMN kept.demand."q95" IS 'quantile 0.95, in unit';
COMMENT ON COLUMN kept.demand."q995" IS 'quantile 0.995, in unit';
COMMENT ON COLUMN kept.demand."low" IS 'least, in unit';
COMMENT ON COLUMN kept.demand."high" IS 'greatest, in unit';
COMMENT ON COLUMN kept.demand."ran_out_share" IS 'share of builds at the stop, 0 to 1';

CREATE TABLE kept.worst (
    "study_id" INTEGER NOT NULL, "stage" VARCHAR, "measure_no" INTEGER, "direction" VARCHAR, "value" DOUBLE,
    "source" VARCHAR, "axis" VARCHAR, "error" DOUBLE
);
COMMENT ON TABLE kept.worst IS 'Worst builds found inside the zones';
COMMENT ON COLUMN kept.worst."study_id" IS 'study';
COMMENT ON COLUMN kept.worst."stage" IS 'before | after alignment';
COMMENT ON COLUMN kept.worst."measure_no" IS '0, 1, 2 ... as in the study file';
COMMENT ON COLUMN kept.worst."direction" IS 'low | high';
COMMENT ON COLUMN kept.worst."value" IS 'value of the measure at that build';
COMMENT ON COLUMN kept.worst."source" IS 'PART.FEATURE';
COMMENT ON COLUMN kept.worst."axis" IS 'x, y, z | length | tilt_1, tilt_2';
COMMENT ON COLUMN kept.worst."error" IS 'error of that scalar, mm or deg';

CREATE TABLE kept.correlations (
    "study_id" INTEGER NOT NULL, "stage" VARCHAR, "measure_a" VARCHAR, "measure_b" VARCHAR, "r" DOUBLE
);
COMMENT ON TABLE kept.correlations IS 'Correlation of measures over the builds';
COMMENT ON COLUMN kept.correlations."study_id" IS 'study';
COMMENT ON COLUMN kept.correlations."stage" IS 'before | after alignment';
COMMENT ON COLUMN kept.correlations."measure_a" IS 'name of one measure';
COMMENT ON COLUMN kept.correlations."measure_b" IS 'name of the other';
COMMENT ON COLUMN kept.correlations."r" IS 'coefficient, -1 to 1';

CREATE TABLE kept.failures (
    "study_id" INTEGER NOT NULL, "stage" VARCHAR, "source" VARCHAR, "rank" INTEGER, "value" DOUBLE
);
COMMENT ON TABLE kept.failures IS 'What makes builds fail to assemble, where indices are withheld for it';
COMMENT ON COLUMN kept.failures."study_id" IS 'study';
COMMENT ON COLUMN kept.failures."stage" IS 'before | after alignment';
COMMENT ON COLUMN kept.failures."source" IS 'PART.FEATURE';
COMMENT ON COLUMN kept.failures."rank" IS '1 is the strongest';
COMMENT ON COLUMN kept.failures."value" IS 'share of the variance of failing, or its mean absolute effect by the morris method';
