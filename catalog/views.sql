-- The public face for SQL, CSV and Parquet. Tables behind it may change, these views stay.

CREATE OR REPLACE VIEW geometries AS
SELECT g.name AS geometry, r.number AS revision, g.name || '@' || r.number AS spec, r.linkage, r.axle, r.note,
       r.given_axes, r.given_units, r.given_side, r.created, r.by_whom, r.why, r.content_hash,
       r.number = max(r.number) OVER (PARTITION BY r.geometry_id) AS newest
FROM kept.revisions r JOIN kept.geometries g ON g.id = r.geometry_id;
COMMENT ON VIEW geometries IS 'Every registered revision of every geometry';
COMMENT ON COLUMN geometries.geometry IS 'name of the geometry';
COMMENT ON COLUMN geometries.revision IS 'number of the revision: 1, 2, 3 ...';
COMMENT ON COLUMN geometries.spec IS 'NAME@REVISION, as commands take it';
COMMENT ON COLUMN geometries.linkage IS 'kind of linkage';
COMMENT ON COLUMN geometries.axle IS 'front | rear';
COMMENT ON COLUMN geometries.note IS 'free text of the file';
COMMENT ON COLUMN geometries.given_axes IS 'axes of the given file; points here are in ISO 8855 axes';
COMMENT ON COLUMN geometries.given_units IS 'length unit of the given file; points here are in mm';
COMMENT ON COLUMN geometries.given_side IS 'side the file describes';
COMMENT ON COLUMN geometries.created IS 'when registered, UTC';
COMMENT ON COLUMN geometries.by_whom IS 'who registered it';
COMMENT ON COLUMN geometries.why IS 'why it was changed';
COMMENT ON COLUMN geometries.content_hash IS 'sha256 (hex) of the validated content';
COMMENT ON COLUMN geometries.newest IS 'whether it is the newest revision of its geometry';

CREATE OR REPLACE VIEW points AS
SELECT g.name AS geometry, r.number AS revision, p.side, p.point, p.x_mm, p.y_mm, p.z_mm
FROM kept.points p JOIN kept.revisions r ON r.id = p.revision_id JOIN kept.geometries g ON g.id = r.geometry_id;
COMMENT ON VIEW points IS 'Points of every revision at design: ISO 8855 axes, car coordinates';
COMMENT ON COLUMN points.geometry IS 'name of the geometry';
COMMENT ON COLUMN points.revision IS 'number of the revision';
COMMENT ON COLUMN points.side IS 'left | right';
COMMENT ON COLUMN points.point IS 'name of the point';
COMMENT ON COLUMN points.x_mm IS 'mm, forward';
COMMENT ON COLUMN points.y_mm IS 'mm, to the left of the centre plane';
COMMENT ON COLUMN points.z_mm IS 'mm, up';

CREATE OR REPLACE VIEW measures AS
SELECT g.name AS geometry, r.number AS revision, m.side, m.key AS measure, m.value, m.unit
FROM kept.revision_measures m
JOIN kept.revisions r ON r.id = m.revision_id JOIN kept.geometries g ON g.id = r.geometry_id;
COMMENT ON VIEW measures IS 'Measures of every revision at design';
COMMENT ON COLUMN measures.geometry IS 'name of the geometry';
COMMENT ON COLUMN measures.revision IS 'number of the revision';
COMMENT ON COLUMN measures.side IS 'left | right | axle';
COMMENT ON COLUMN measures.measure IS 'key of the measure';
COMMENT ON COLUMN measures.value IS 'in unit; NULL where undefined';
COMMENT ON COLUMN measures.unit IS 'unit of value; 1 for a plain ratio';

CREATE OR REPLACE VIEW studies AS
SELECT s.id AS study, s.title, s.state::VARCHAR AS state, s.method, s.size, s.seed, s.sides, g.name AS geometry,
       r.number AS revision, s.version, s.created, s.by_whom, s.started, s.finished, s.done_builds, s.total_builds,
       s.error, s.final_stage, s.result_hash
FROM kept.studies s JOIN kept.revisions r ON r.id = s.revision_id JOIN kept.geometries g ON g.id = r.geometry_id;
COMMENT ON VIEW studies IS 'Queued, running and finished studies';
COMMENT ON COLUMN studies.study IS 'number of the study';
COMMENT ON COLUMN studies.title IS 'title in the study file';
COMMENT ON COLUMN studies.state IS 'queued | running | done | failed | cancelled';
COMMENT ON COLUMN studies.method IS 'linear | morris | sobol | spread | worst';
COMMENT ON COLUMN studies.size IS 'base sample, trajectories or builds, as the method counts';
COMMENT ON COLUMN studies.seed IS 'seed of all draws';
COMMENT ON COLUMN studies.sides IS 'mirrored | independent';
COMMENT ON COLUMN studies.geometry IS 'name of the geometry';
COMMENT ON COLUMN studies.revision IS 'number of its revision';
COMMENT ON COLUMN studies.version IS 'version of the program that queued it';
COMMENT ON COLUMN studies.created IS 'when queued, UTC';
COMMENT ON COLUMN studies.by_whom IS 'who queued it';
COMMENT ON COLUMN studies.started IS 'first claim, UTC';
COMMENT ON COLUMN studies.finished IS 'end, whatever its outcome, UTC';
COMMENT ON COLUMN studies.done_builds IS 'builds finished so far';
COMMENT ON COLUMN studies.total_builds IS 'builds to run; NULL until known';
COMMENT ON COLUMN studies.error IS 'why it failed';
COMMENT ON COLUMN studies.final_stage IS 'stage at which the answer is read';
COMMENT ON COLUMN studies.result_hash IS 'sha256 (hex) over the result tables';

CREATE OR REPLACE VIEW indices AS
SELECT k.study_id AS study, g.name AS geometry, r.number AS revision, s.method, k.* EXCLUDE (study_id),
       k.stage = s.final_stage AS final
FROM kept.ranking k JOIN kept.studies s ON s.id = k.study_id
JOIN kept.revisions r ON r.id = s.revision_id JOIN kept.geometries g ON g.id = r.geometry_id
WHERE s.state = 'done';
COMMENT ON VIEW indices IS 'What each error source does to each measure, of every finished study';
COMMENT ON COLUMN indices."study" IS 'number of the study';
COMMENT ON COLUMN indices."geometry" IS 'name of the geometry';
COMMENT ON COLUMN indices."revision" IS 'number of its revision';
COMMENT ON COLUMN indices."method" IS 'linear | morris | sobol | spread | worst';
COMMENT ON COLUMN indices."stage" IS 'before | after alignment';
COMMENT ON COLUMN indices."measure_no" IS '0, 1, 2 ... as in the study file';
COMMENT ON COLUMN indices."measure" IS 'name of the measure';
COMMENT ON COLUMN indices."unit" IS 'unit of the measure';
COMMENT ON COLUMN indices."source" IS 'PART.FEATURE';
COMMENT ON COLUMN indices."rank" IS '1 is the strongest';
COMMENT ON COLUMN indices."st" IS 'total share of variance, 0 to 1';
COMMENT ON COLUMN indices."st_low" IS 'lower 95 % bound of st';
COMMENT ON COLUMN indices."st_high" IS 'upper 95 % bound of st';
COMMENT ON COLUMN indices."s1" IS 'share of variance by itself, 0 to 1';
COMMENT ON COLUMN indices."s1_low" IS 'lower 95 % bound of s1';
COMMENT ON COLUMN indices."s1_high" IS 'upper 95 % bound of s1';
COMMENT ON COLUMN indices."linear_share" IS 'share of variance by the linear model, 0 to 1';
COMMENT ON COLUMN indices."mu_star" IS 'mean absolute elementary effect, unit of the measure';
COMMENT ON COLUMN indices."mu_star_low" IS 'lower 95 % bound of mu_star';
COMMENT ON COLUMN indices."mu_star_high" IS 'upper 95 % bound of mu_star';
COMMENT ON COLUMN indices."effect" IS 'signed effect of each scalar, unit of the measure per effect_unit';
COMMENT ON COLUMN indices."effect_axes" IS 'x, y, z | length | tilt_1, tilt_2';
COMMENT ON COLUMN indices."effect_unit" IS 'per mm or per deg';
COMMENT ON COLUMN indices."effect_per_mm" IS 'length of effect, unit of the measure per mm or deg';
COMMENT ON COLUMN indices."tied" IS 'not told apart from the one ranked just above';
COMMENT ON COLUMN indices."verdict" IS 'hold | watch | open; NULL without limits';
COMMENT ON COLUMN indices."final" IS 'whether it is the stage at which the answer is read';

CREATE OR REPLACE VIEW spreads AS
SELECT t.study_id AS study, g.name AS geometry, r.number AS revision, s.method, t.* EXCLUDE (study_id),
       t.stage = s.final_stage AS final
FROM kept.stats t JOIN kept.studies s ON s.id = t.study_id
JOIN kept.revisions r ON r.id = s.revision_id JOIN kept.geometries g ON g.id = r.geometry_id
WHERE s.state = 'done';
COMMENT ON VIEW spreads IS 'Distribution of each measure over the builds, of every finished study';
COMMENT ON COLUMN spreads."study" IS 'number of the study';
COMMENT ON COLUMN spreads."geometry" IS 'name of the geometry';
COMMENT ON COLUMN spreads."revision" IS 'number of its revision';
COMMENT ON COLUMN spreads."method" IS 'linear | morris | sobol | spread | worst';
COMMENT ON COLUMN spreads."stage" IS 'before | after alignment';
COMMENT ON COLUMN spreads."measure_no" IS '0, 1, 2 ... as in the study file';
COMMENT ON COLUMN spreads."measure" IS 'name of the measure';
COMMENT ON COLUMN spreads."of" IS 'key of the measure';
COMMENT ON COLUMN spreads."unit" IS 'unit of the measure';
COMMENT ON COLUMN spreads."side" IS 'left | right | axle';
COMMENT ON COLUMN spreads."position" IS 'position or sweep at which it is taken (mm, deg)';
COMMENT ON COLUMN spreads."nominal" IS 'value of the drawing, unit of the measure';
COMMENT ON COLUMN spreads."mean" IS 'unit of the measure';
COMMENT ON COLUMN spreads."sd" IS 'standard deviation, unit of the measure';
COMMENT ON COLUMN spreads."low" IS 'least value, unit of the measure';
COMMENT ON COLUMN spreads."high" IS 'greatest value, unit of the measure';
COMMENT ON COLUMN spreads."q005" IS 'quantile 0.005, unit of the measure';
COMMENT ON COLUMN spreads."q025" IS 'quantile 0.025, unit of the measure';
COMMENT ON COLUMN spreads."q05" IS 'quantile 0.05, unit of the measure';
COMMENT ON COLUMN spreads."q25" IS 'quantile 0.25, unit of the measure';
COMMENT ON COLUMN spreads."q50" IS 'quantile 0.5, unit of the measure';
COMMENT ON COLUMN spreads."q75" IS 'quantile 0.75, unit of the measure';
COMMENT ON COLUMN spreads."q95" IS 'quantile 0.95, unit of the measure';
COMMENT ON COLUMN spreads."q975" IS 'quantile 0.975, unit of the measure';
COMMENT ON COLUMN spreads."q995" IS 'quantile 0.995, unit of the measure';
COMMENT ON COLUMN spreads."limit_low" IS 'lower limit, unit of the measure';
COMMENT ON COLUMN spreads."limit_high" IS 'upper limit, unit of the measure';
COMMENT ON COLUMN spreads."good_share" IS 'share of all builds inside the limits, 0 to 1';
COMMENT ON COLUMN spreads."good_low" IS 'lower 95 % bound of good_share';
COMMENT ON COLUMN spreads."good_high" IS 'upper 95 % bound of good_share';
COMMENT ON COLUMN spreads."builds" IS 'builds run';
COMMENT ON COLUMN spreads."unassembled" IS 'builds without value';
COMMENT ON COLUMN spreads."rss" IS 'root-sum-square stack, +-, unit of the measure';
COMMENT ON COLUMN spreads."worst_low" IS 'lowest value of the worst-case stack of the linear model, unit of the measure';
COMMENT ON COLUMN spreads."worst_high" IS 'highest value of the worst-case stack of the linear model, unit of the measure';
COMMENT ON COLUMN spreads."final" IS 'whether it is the stage at which the answer is read';

CREATE OR REPLACE VIEW critical_pivots AS
WITH newest AS (
    SELECT id, revision_id, final_stage FROM kept.studies WHERE state = 'done' AND ranked
    QUALIFY row_number() OVER (PARTITION BY revision_id ORDER BY finished DESC, id DESC) = 1
)
SELECT g.name AS geometry, r.number AS revision, n.id AS study, k.stage, k.measure_no, k.measure, k.unit,
       k."rank", k.source, k.st, k.st_low, k.st_high, k.linear_share, k.mu_star, k.effect_per_mm, k.tied, k.verdict
FROM newest n JOIN kept.ranking k ON k.study_id = n.id AND k.stage = n.final_stage AND k."rank" <= 3
JOIN kept.revisions r ON r.id = n.revision_id JOIN kept.geometries g ON g.id = r.geometry_id;
COMMENT ON VIEW critical_pivots IS
    'The three strongest error sources of each measure, from the newest ranked study of each revision';
COMMENT ON COLUMN critical_pivots."geometry" IS 'name of the geometry';
COMMENT ON COLUMN critical_pivots."revision" IS 'number of its revision';
COMMENT ON COLUMN critical_pivots."study" IS 'number of the study';
COMMENT ON COLUMN critical_pivots."stage" IS 'before | after alignment';
COMMENT ON COLUMN critical_pivots."measure_no" IS '0, 1, 2 ... as in the study file';
COMMENT ON COLUMN critical_pivots."measure" IS 'name of the measure';
COMMENT ON COLUMN critical_pivots."unit" IS 'unit of the measure';
COMMENT ON COLUMN critical_pivots."rank" IS '1 is the strongest';
COMMENT ON COLUMN critical_pivots."source" IS 'PART.FEATURE';
COMMENT ON COLUMN critical_pivots."st" IS 'total share of variance, 0 to 1';
COMMENT ON COLUMN critical_pivots."st_low" IS 'lower 95 % bound of st';
COMMENT ON COLUMN critical_pivots."st_high" IS 'upper 95 % bound of st';
COMMENT ON COLUMN critical_pivots."linear_share" IS 'share of variance by the linear model, 0 to 1';
COMMENT ON COLUMN critical_pivots."mu_star" IS 'mean absolute elementary effect, unit of the measure';
COMMENT ON COLUMN critical_pivots."effect_per_mm" IS 'length of effect, unit of the measure per mm or deg';
COMMENT ON COLUMN critical_pivots."tied" IS 'not told apart from the one ranked just above';
COMMENT ON COLUMN critical_pivots."verdict" IS 'hold | watch | open; NULL without limits';
