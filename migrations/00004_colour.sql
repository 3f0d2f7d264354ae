-- Who changed a specification and why, when it is in force, what a station's
-- readings are worth, and which quantities were computed rather than measured.

-- +goose Up
ALTER TABLE spec
	ADD COLUMN author text NOT NULL DEFAULT '',      -- who published the version, as they signed it
	ADD COLUMN reason text NOT NULL DEFAULT '',      -- why, in their words
	ADD COLUMN valid_from date,                      -- first day it is meant for; null: always was
	ADD COLUMN valid_until date;                     -- last day it is meant for; null: no end

CREATE TABLE station_uncertainty (
	station              text NOT NULL,
	quantity             text NOT NULL,
	standard_uncertainty double precision NOT NULL CHECK (standard_uncertainty > 0), -- of one reading, in the quantity's unit
	PRIMARY KEY (station, quantity)
);
COMMENT ON TABLE station_uncertainty IS 'what a station says of its readings; a specification may state its own';

ALTER TABLE recipe
	ADD COLUMN colour_model jsonb; -- how the dominant wavelength follows from the peak; null: the default line model

ALTER TABLE measurement
	ADD COLUMN derived_from jsonb NOT NULL DEFAULT '{}', -- quantity → what it was computed from; it has a summary and a small map but no plane
	ADD COLUMN suspects jsonb NOT NULL DEFAULT '[]';     -- what breaks physics in it

-- +goose Down
-- What is left of computed quantities would be taken for measured ones.
DELETE FROM summary p USING measurement m
WHERE p.wafer_id = m.wafer_id AND p.measurement_id = m.id AND p.measured_at = m.measured_at AND m.derived_from ? p.quantity;
DELETE FROM small_map p USING measurement m
WHERE p.wafer_id = m.wafer_id AND p.measurement_id = m.id AND p.measured_at = m.measured_at AND m.derived_from ? p.quantity;
ALTER TABLE measurement DROP COLUMN suspects, DROP COLUMN derived_from;
ALTER TABLE recipe DROP COLUMN colour_model;
DROP TABLE station_uncertainty;
ALTER TABLE spec DROP COLUMN valid_until, DROP COLUMN valid_from, DROP COLUMN reason, DROP COLUMN author;
