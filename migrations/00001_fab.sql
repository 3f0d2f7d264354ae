-- The fab as people speak of it: where wafers grew and what they are for. None
-- of it is needed to store a measurement: a run sheet may come later.

-- +goose Up
CREATE TABLE quantity (
	name       text PRIMARY KEY,
	label      text NOT NULL,
	unit       text NOT NULL,
	resolution double precision NOT NULL CHECK (resolution > 0)
);
COMMENT ON TABLE quantity IS 'quantities declared by a profile, a catalogue or a source; built-in ones live in the binary';

CREATE TABLE layout (
	id                bigint GENERATED ALWAYS AS IDENTITY PRIMARY KEY,
	name              text NOT NULL UNIQUE,
	wafer_diameter_mm double precision NOT NULL,
	die_pitch_x_mm    double precision NOT NULL,
	die_pitch_y_mm    double precision NOT NULL,
	edge_exclusion_mm double precision NOT NULL,
	mark              text NOT NULL CHECK (mark IN ('flat', 'notch', 'none')),
	mark_angle_deg    double precision NOT NULL,
	x_axis            text NOT NULL CHECK (x_axis IN ('right', 'left')),
	y_axis            text NOT NULL CHECK (y_axis IN ('up', 'down')),
	centre_x          double precision NOT NULL,
	centre_y          double precision NOT NULL
);
COMMENT ON TABLE layout IS 'the die grid of a product; centre_x and centre_y are the die coordinates of the centre of the wafer';

CREATE TABLE product (
	id        bigint GENERATED ALWAYS AS IDENTITY PRIMARY KEY,
	name      text NOT NULL UNIQUE,
	layout_id bigint REFERENCES layout -- null: a run sheet named the product before a catalogue described it
);

CREATE TABLE recipe (
	id   bigint GENERATED ALWAYS AS IDENTITY PRIMARY KEY,
	name text NOT NULL UNIQUE
);

CREATE TABLE recipe_target (
	recipe_id    bigint NOT NULL REFERENCES recipe ON DELETE CASCADE,
	quantity     text NOT NULL,
	value        double precision NOT NULL,
	value_window double precision NOT NULL CHECK (value_window > 0), -- half width within which a wafer is on colour
	PRIMARY KEY (recipe_id, quantity)
);

CREATE TABLE reactor (
	id   bigint GENERATED ALWAYS AS IDENTITY PRIMARY KEY,
	name text NOT NULL UNIQUE
);

CREATE TABLE run (
	id         bigint GENERATED ALWAYS AS IDENTITY PRIMARY KEY,
	reactor_id bigint NOT NULL REFERENCES reactor,
	number     integer NOT NULL, -- counts up per reactor
	recipe_id  bigint REFERENCES recipe,
	carrier    text NOT NULL DEFAULT '',
	grown_at   timestamptz,
	UNIQUE (reactor_id, number)
);

CREATE TABLE wafer (
	id                  bigint GENERATED ALWAYS AS IDENTITY PRIMARY KEY,
	name                text NOT NULL UNIQUE,
	lot                 text NOT NULL DEFAULT '',
	run_id              bigint REFERENCES run,
	carrier             text NOT NULL DEFAULT '',
	ring                text NOT NULL DEFAULT '',
	pocket              text NOT NULL DEFAULT '',
	recipe_id           bigint REFERENCES recipe,
	product_id          bigint REFERENCES product,
	last_measured_at    timestamptz, -- of its newest measurement of any kind: the order of the wafers list
	last_measurement_id bigint
);
CREATE INDEX wafer_last_measured ON wafer (last_measured_at DESC NULLS LAST, id DESC);
CREATE INDEX wafer_lot ON wafer (lower(lot) text_pattern_ops);
CREATE INDEX wafer_name ON wafer (lower(name) text_pattern_ops); -- the search field types the start of a name
CREATE INDEX wafer_run ON wafer (run_id);
CREATE INDEX wafer_product ON wafer (product_id);
CREATE INDEX wafer_recipe ON wafer (recipe_id);

CREATE TABLE spec (
	id        bigint GENERATED ALWAYS AS IDENTITY PRIMARY KEY,
	name      text NOT NULL,
	version   integer NOT NULL CHECK (version > 0),
	title     text NOT NULL,
	kind      text NOT NULL, -- the kind of measurement it bins
	products  text[] NOT NULL,
	document  text NOT NULL, -- the YAML as given; never changes once stored
	latest    boolean NOT NULL,
	stored_at timestamptz NOT NULL DEFAULT now(),
	UNIQUE (name, version)
);
CREATE UNIQUE INDEX spec_latest ON spec (name) WHERE latest;

CREATE TABLE reading_profile (
	name      text NOT NULL,
	version   integer NOT NULL,
	document  text NOT NULL,
	stored_at timestamptz NOT NULL DEFAULT now(),
	PRIMARY KEY (name, version)
);

-- +goose Down
DROP TABLE reading_profile, spec, wafer, run, reactor, recipe_target, recipe, product, layout, quantity;
