-- Verdicts by counterfactual, and what they are said of.

CREATE TABLE kept.verdicts (
    "study_id" INTEGER NOT NULL, "source" VARCHAR, "verdict" VARCHAR, "zone" VARCHAR, "process" VARCHAR,
    "looser_zone" VARCHAR, "looser_process" VARCHAR, "good_share" DOUBLE, "good_low" DOUBLE, "good_high" DOUBLE,
    "as_drawn" DOUBLE
);
COMMENT ON TABLE kept.verdicts IS 'What became of the good share when one source alone was moved to its next looser process';
COMMENT ON COLUMN kept.verdicts."study_id" IS 'study';
COMMENT ON COLUMN kept.verdicts."source" IS 'error source';
COMMENT ON COLUMN kept.verdicts."verdict" IS 'hold | watch | open';
COMMENT ON COLUMN kept.verdicts."zone" IS 'zone as drawn, in words';
COMMENT ON COLUMN kept.verdicts."process" IS 'process as drawn, where one is named';
COMMENT ON COLUMN kept.verdicts."looser_zone" IS 'zone it was moved to, in words';
COMMENT ON COLUMN kept.verdicts."looser_process" IS 'process it was moved to, NULL: twice the zone';
COMMENT ON COLUMN kept.verdicts."good_share" IS 'share of good builds then, 0 to 1';
COMMENT ON COLUMN kept.verdicts."good_low" IS 'lower end of its 95 % Clopper-Pearson interval';
COMMENT ON COLUMN kept.verdicts."good_high" IS 'upper end of its 95 % Clopper-Pearson interval';
COMMENT ON COLUMN kept.verdicts."as_drawn" IS 'share of good builds of the same draws as drawn';

ALTER TABLE kept.stats ADD COLUMN "lost_share" DOUBLE;
COMMENT ON COLUMN kept.stats."lost_share" IS 'share of builds lost to this measure, 0 to 1';
ALTER TABLE kept.study_facts ADD COLUMN "all_cars_low" JSON;
COMMENT ON COLUMN kept.study_facts."all_cars_low" IS 'lower end of the 95 % interval of all_cars';
ALTER TABLE kept.study_facts ADD COLUMN "all_cars_high" JSON;
COMMENT ON COLUMN kept.study_facts."all_cars_high" IS 'upper end of the 95 % interval of all_cars';
ALTER TABLE kept.study_facts ADD COLUMN "open_together" JSON;
COMMENT ON COLUMN kept.study_facts."open_together" IS 'sources that pass when loosened together, a list of names';
ALTER TABLE kept.study_facts ADD COLUMN "open_together_good_share" JSON;
COMMENT ON COLUMN kept.study_facts."open_together_good_share" IS 'share of good builds with that set loosened, 0 to 1';
ALTER TABLE kept.study_facts ADD COLUMN "open_together_low" JSON;
COMMENT ON COLUMN kept.study_facts."open_together_low" IS 'lower end of its 95 % Clopper-Pearson interval';
ALTER TABLE kept.study_facts ADD COLUMN "open_together_high" JSON;
COMMENT ON COLUMN kept.study_facts."open_together_high" IS 'upper end of its 95 % Clopper-Pearson interval';
