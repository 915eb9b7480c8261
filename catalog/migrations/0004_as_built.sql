-- As-built cars: points measured on a car, kept with the revision of the geometry that it was built to.

CREATE TABLE kept.as_built (
    "id" INTEGER PRIMARY KEY, "revision_id" INTEGER NOT NULL, "car" VARCHAR NOT NULL, "created" TIMESTAMP NOT NULL,
    "by_whom" VARCHAR NOT NULL, "note" VARCHAR NOT NULL, "text" VARCHAR NOT NULL, "content_hash" VARCHAR NOT NULL
);
COMMENT ON TABLE kept.as_built IS 'Measurements of built cars; a row never changes';
COMMENT ON COLUMN kept.as_built."id" IS 'number of the measurement';
COMMENT ON COLUMN kept.as_built."revision_id" IS 'revision of the geometry that the car was built to';
COMMENT ON COLUMN kept.as_built."car" IS 'name of the car';
COMMENT ON COLUMN kept.as_built."created" IS 'when added, UTC';
COMMENT ON COLUMN kept.as_built."by_whom" IS 'who added it';
COMMENT ON COLUMN kept.as_built."note" IS 'free text';
COMMENT ON COLUMN kept.as_built."text" IS 'the file as it was given';
COMMENT ON COLUMN kept.as_built."content_hash" IS 'sha256 (hex) over the measured points';

CREATE TABLE kept.as_built_points (
    "as_built_id" INTEGER NOT NULL, "side" VARCHAR NOT NULL, "point" VARCHAR NOT NULL, "x_mm" DOUBLE NOT NULL,
    "y_mm" DOUBLE NOT NULL, "z_mm" DOUBLE NOT NULL
);
COMMENT ON TABLE kept.as_built_points IS 'Measured points: ISO 8855 axes, car coordinates';
COMMENT ON COLUMN kept.as_built_points."as_built_id" IS 'measurement';
COMMENT ON COLUMN kept.as_built_points."side" IS 'left | right; left for the links of a solid axle';
COMMENT ON COLUMN kept.as_built_points."point" IS 'name of the point; wheel_centre for the wheel';
COMMENT ON COLUMN kept.as_built_points."x_mm" IS 'mm, forward';
COMMENT ON COLUMN kept.as_built_points."y_mm" IS 'mm, to the left of the centre plane';
COMMENT ON COLUMN kept.as_built_points."z_mm" IS 'mm, up';
