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
COMMENT ON COLUMN studies.version IS 'version of the program that runs it; until then of the one that queued it';
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
COMMENT ON COLUMN spreads."lost_share" IS 'share of builds lost to this measure, 0 to 1';
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

CREATE OR REPLACE VIEW processes AS
SELECT p.name AS process, p.version, p.retired IS NULL AS in_force, r.from_mm, r.from_included, r.up_to_mm,
       coalesce(r.zone, p.zone)::VARCHAR AS zone, p.distribution, p.cp, p.truncated, p.jig_cost, p.piece_cost, p.looser,
       (SELECT string_agg(t.name, ', ' ORDER BY t.name) FROM kept.processes t
        WHERE t.looser = p.name AND t.retired IS NULL) AS tighter,
       (SELECT count(DISTINCT k.study_id) FROM kept.study_processes k
        WHERE k.process = p.name AND k.version = p.version) AS studies,
       p.source, p.remark, p.created, p.by_whom, p.retired, p.retired_by
FROM kept.processes p LEFT JOIN kept.process_ranges r ON r.process_id = p.id;
COMMENT ON VIEW processes IS 'Ways of making a feature: zone, law and costs, a row for each range of nominal dimensions';
COMMENT ON COLUMN processes.process IS 'name, as study files write it (with @NOMINAL where it goes by nominal dimension)';
COMMENT ON COLUMN processes.version IS '1, 2, 3 ... within the name';
COMMENT ON COLUMN processes.in_force IS 'whether studies queued now get this row';
COMMENT ON COLUMN processes.from_mm IS 'lower edge of the nominal dimensions, mm; NULL where they do not matter';
COMMENT ON COLUMN processes.from_included IS 'whether the lower edge belongs to the range';
COMMENT ON COLUMN processes.up_to_mm IS 'upper edge of the nominal dimensions, mm; it belongs to the range';
COMMENT ON COLUMN processes.zone IS 'keys of the zone as in a study file (mm, deg), as JSON';
COMMENT ON COLUMN processes.distribution IS 'uniform | normal';
COMMENT ON COLUMN processes.cp IS 'of a normal distribution: 1 leaves 99.73 % inside the zone';
COMMENT ON COLUMN processes.truncated IS 'whether what lies outside the zone is rejected';
COMMENT ON COLUMN processes.jig_cost IS 'cost once, whatever the number of pieces; the shop''s own unit';
COMMENT ON COLUMN processes.piece_cost IS 'cost of each piece, in the same unit';
COMMENT ON COLUMN processes.looser IS 'name of the next looser process';
COMMENT ON COLUMN processes.tighter IS 'names of the processes in force that have this one as their next looser';
COMMENT ON COLUMN processes.studies IS 'how many studies were queued with this row, as asked for or as looser';
COMMENT ON COLUMN processes.source IS 'where the zone comes from';
COMMENT ON COLUMN processes.remark IS 'free text';
COMMENT ON COLUMN processes.created IS 'when added, UTC';
COMMENT ON COLUMN processes.by_whom IS 'who added it';
COMMENT ON COLUMN processes.retired IS 'since when it is not in force any more, UTC';
COMMENT ON COLUMN processes.retired_by IS 'who retired it';

CREATE OR REPLACE VIEW as_built_points AS
SELECT b.id AS as_built, g.name AS geometry, r.number AS revision, b.car, m.side, m.point, m.x_mm, m.y_mm, m.z_mm,
       m.x_mm - n.x_mm AS dx_mm, m.y_mm - n.y_mm AS dy_mm, m.z_mm - n.z_mm AS dz_mm,
       2 * sqrt((m.x_mm - n.x_mm) ** 2 + (m.y_mm - n.y_mm) ** 2 + (m.z_mm - n.z_mm) ** 2) AS position_mm,
       b.created, b.by_whom, b.note
FROM kept.as_built b JOIN kept.as_built_points m ON m.as_built_id = b.id
JOIN kept.points n ON n.revision_id = b.revision_id AND n.side = m.side AND n.point = m.point
JOIN kept.revisions r ON r.id = b.revision_id JOIN kept.geometries g ON g.id = r.geometry_id;
COMMENT ON VIEW as_built_points IS 'Points measured on built cars against the drawing: ISO 8855 axes, car coordinates';
COMMENT ON COLUMN as_built_points.as_built IS 'number of the measurement';
COMMENT ON COLUMN as_built_points.geometry IS 'name of the geometry';
COMMENT ON COLUMN as_built_points.revision IS 'number of the revision that the car was built to';
COMMENT ON COLUMN as_built_points.car IS 'name of the car';
COMMENT ON COLUMN as_built_points.side IS 'left | right; left for the links of a solid axle';
COMMENT ON COLUMN as_built_points.point IS 'name of the point';
COMMENT ON COLUMN as_built_points.x_mm IS 'measured, mm, forward';
COMMENT ON COLUMN as_built_points.y_mm IS 'measured, mm, to the left of the centre plane';
COMMENT ON COLUMN as_built_points.z_mm IS 'measured, mm, up';
COMMENT ON COLUMN as_built_points.dx_mm IS 'measured minus drawing, mm, forward';
COMMENT ON COLUMN as_built_points.dy_mm IS 'measured minus drawing, mm, to the left';
COMMENT ON COLUMN as_built_points.dz_mm IS 'measured minus drawing, mm, up';
COMMENT ON COLUMN as_built_points.position_mm IS 'actual position: twice the distance from the drawing''s place, mm, to compare with a diameter';
COMMENT ON COLUMN as_built_points.created IS 'when added, UTC';
COMMENT ON COLUMN as_built_points.by_whom IS 'who added it';
COMMENT ON COLUMN as_built_points.note IS 'free text';

CREATE OR REPLACE VIEW releases AS
WITH newest AS (
    SELECT r.id, max(r.number) OVER (PARTITION BY r.geometry_id) AS number FROM kept.revisions r
), issues AS (
    SELECT k.*, g.name AS geometry_name, r.number AS revision, n.number AS newest_revision,
           before.issue AS supersedes_issue, after.issue AS superseded_by
    FROM kept.releases k JOIN kept.revisions r ON r.id = k.revision_id JOIN kept.geometries g ON g.id = r.geometry_id
    JOIN newest n ON n.id = r.id
    LEFT JOIN kept.releases before ON before.id = k.supersedes
    LEFT JOIN kept.releases after ON after.supersedes = k.id
)
SELECT i.id AS release, i.drawing, i.issue, i.part, t.place, t.feature, t.shop_name, t.callout, t.zone, t.datums,
       t.distribution, t.process, t.condition, t.checked, t.verdict, t.figures, t.remark, t.reason, i.by_whom,
       i.created AS released, i.geometry_name AS geometry, i.revision, i.study_id AS study,
       i.supersedes_issue AS supersedes, i.superseded_by, i.superseded_by IS NULL AS "current",
       i.newest_revision > i.revision AS stale, i.newest_revision, i.record_hash
FROM issues i JOIN kept.release_rows t ON t.release_id = i.id;
COMMENT ON VIEW releases IS 'Released tolerances: one row a feature of every issue of every drawing';
COMMENT ON COLUMN releases.release IS 'number of the release';
COMMENT ON COLUMN releases.drawing IS 'drawing number';
COMMENT ON COLUMN releases.issue IS 'issue of the drawing';
COMMENT ON COLUMN releases.part IS 'part that the drawing is of';
COMMENT ON COLUMN releases.place IS '1, 2, 3 ... as on the note';
COMMENT ON COLUMN releases.feature IS 'PART.FEATURE';
COMMENT ON COLUMN releases.shop_name IS 'the shop''s own name of the point, where it differs';
COMMENT ON COLUMN releases.callout IS 'the tolerance as it stands on the drawing, mm and degrees';
COMMENT ON COLUMN releases.zone IS 'the zone in words, mm or degrees';
COMMENT ON COLUMN releases.datums IS 'what it is measured from';
COMMENT ON COLUMN releases.distribution IS 'law of the errors that the study drew';
COMMENT ON COLUMN releases.process IS 'process that the zone was taken from, where one is named';
COMMENT ON COLUMN releases.condition IS 'condition in which it holds: welded, unpainted ...';
COMMENT ON COLUMN releases.checked IS 'how it is checked';
COMMENT ON COLUMN releases.verdict IS 'hold | watch | open; NULL without limits';
COMMENT ON COLUMN releases.figures IS 'the figures behind it, in words';
COMMENT ON COLUMN releases.remark IS 'what else has to be known of it';
COMMENT ON COLUMN releases.reason IS 'why it was released so';
COMMENT ON COLUMN releases.by_whom IS 'who released it';
COMMENT ON COLUMN releases.released IS 'when, UTC';
COMMENT ON COLUMN releases.geometry IS 'name of the geometry that was studied';
COMMENT ON COLUMN releases.revision IS 'number of its revision';
COMMENT ON COLUMN releases.study IS 'number of the study';
COMMENT ON COLUMN releases.supersedes IS 'issue that it took the place of';
COMMENT ON COLUMN releases.superseded_by IS 'issue that took its place';
COMMENT ON COLUMN releases."current" IS 'whether no later issue took its place';
COMMENT ON COLUMN releases.stale IS 'whether the geometry has a newer revision than the one that was studied';
COMMENT ON COLUMN releases.newest_revision IS 'number of the newest revision of that geometry';
COMMENT ON COLUMN releases.record_hash IS 'sha256 (hex) over the release and its rows';
