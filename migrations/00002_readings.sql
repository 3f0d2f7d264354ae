-- What was measured. Everything here leads with wafer_id and is partitioned by
-- month of measurement: retention is a dropped partition, and an engine that
-- shards by wafer needs no other schema.

-- +goose Up
CREATE SEQUENCE source_id_seq; -- a load takes its number before its row exists

CREATE TABLE source (
	id          bigint PRIMARY KEY DEFAULT nextval('source_id_seq'),
	name        text NOT NULL,
	sha256      bytea, -- of the decompressed bytes; null when they could not all be read
	bytes       bigint NOT NULL,
	format      text NOT NULL,
	state       text NOT NULL CHECK (state IN ('waiting', 'reading', 'stored', 'refused')),
	reason      text NOT NULL,
	line        integer NOT NULL,
	column_no   integer NOT NULL,
	byte_offset bigint NOT NULL, -- −1: not known
	profile     text NOT NULL,
	seen_at     timestamptz NOT NULL,
	ended_at    timestamptz NOT NULL DEFAULT now(), -- stored or refused
	wafers      integer NOT NULL,
	dies        bigint NOT NULL,
	notices     text[] NOT NULL
);
-- The very same bytes are stored once, whatever they are called and whoever loads them.
CREATE UNIQUE INDEX source_once ON source (sha256) WHERE state = 'stored';
CREATE INDEX source_state ON source (state, id DESC);
CREATE INDEX source_seen ON source (seen_at); -- what became of the last hour's files

CREATE TABLE die_grid (
	id   bigint GENERATED ALWAYS AS IDENTITY PRIMARY KEY,
	hash bytea NOT NULL, -- SHA-256 of runs
	n    integer NOT NULL,
	runs bytea COMPRESSION lz4 NOT NULL, -- 8 bytes a run along x: x int16, y int16, count int32, little-endian
	CONSTRAINT die_grid_hash UNIQUE (hash)
);
COMMENT ON TABLE die_grid IS 'die coordinates, once per distinct grid: y ascending, then x ascending';

CREATE SEQUENCE measurement_id_seq;

CREATE TABLE measurement (
	wafer_id         bigint NOT NULL,
	id               bigint NOT NULL,
	measured_at      timestamptz NOT NULL,
	kind             text NOT NULL,
	station          text NOT NULL,
	drive_current_ma double precision,
	dies             integer NOT NULL,
	remeasured       integer NOT NULL,
	is_current       boolean NOT NULL, -- the newest of its wafer and kind
	state            text NOT NULL, -- colour state word; '' without a target
	main_quantity    text NOT NULL, -- what lists show of it
	source_id        bigint NOT NULL,
	grid_id          bigint NOT NULL,
	source_layout    jsonb, -- what the source itself said of the geometry, completed from the grid's extent
	facts            jsonb NOT NULL,
	notices          text[] NOT NULL,
	stale            boolean NOT NULL DEFAULT false, -- its derived numbers wait to be made again
	PRIMARY KEY (wafer_id, id, measured_at)
) PARTITION BY RANGE (measured_at);
CREATE INDEX measurement_stale ON measurement (id) WHERE stale;

CREATE TABLE measurement_key (
	id          bigint PRIMARY KEY,
	wafer_id    bigint NOT NULL,
	measured_at timestamptz NOT NULL
);
COMMENT ON TABLE measurement_key IS 'leads from a measurement number to its wafer and partition';

CREATE TABLE plane (
	wafer_id       bigint NOT NULL,
	measurement_id bigint NOT NULL,
	measured_at    timestamptz NOT NULL,
	base           double precision NOT NULL,
	resolution     double precision NOT NULL, -- 0 for float encodings
	n              integer NOT NULL,
	encoding       smallint NOT NULL, -- 1 int16, 2 int32, 3 float32, 4 float64
	quantity       text NOT NULL,
	data           bytea COMPRESSION lz4 NOT NULL, -- all lowest bytes, then all next bytes, …: like bytes together compress
	PRIMARY KEY (wafer_id, measurement_id, quantity, measured_at)
) PARTITION BY RANGE (measured_at);
COMMENT ON TABLE plane IS 'one quantity over all dies of one measurement, in the order of its die grid: value = base + k * resolution, the smallest integer (or NaN) is no value';

CREATE TABLE summary (
	wafer_id       bigint NOT NULL,
	measurement_id bigint NOT NULL,
	measured_at    timestamptz NOT NULL,
	quantity       text NOT NULL,
	n              integer NOT NULL,
	mean           double precision, -- null: no value
	median         double precision,
	sd             double precision, -- divisor n − 1
	robust_sd      double precision,
	target         double precision,
	figures        jsonb COMPRESSION lz4 NOT NULL, -- all of it, as the API answers it
	PRIMARY KEY (wafer_id, measurement_id, quantity, measured_at)
) PARTITION BY RANGE (measured_at);

CREATE TABLE small_map (
	wafer_id       bigint NOT NULL,
	measurement_id bigint NOT NULL,
	measured_at    timestamptz NOT NULL,
	quantity       text NOT NULL,
	size           integer NOT NULL,
	low            double precision NOT NULL,
	high           double precision NOT NULL,
	cells          bytea COMPRESSION lz4 NOT NULL, -- size × size codes: 0 no die, 1 low … 255 high
	PRIMARY KEY (wafer_id, measurement_id, quantity, measured_at)
) PARTITION BY RANGE (measured_at);

CREATE TABLE tally (
	wafer_id       bigint NOT NULL,
	measurement_id bigint NOT NULL,
	measured_at    timestamptz NOT NULL,
	spec_id        bigint NOT NULL,
	dies           integer NOT NULL,
	tested         integer NOT NULL,
	good           integer NOT NULL,
	denominator    integer NOT NULL,
	over_layout    boolean NOT NULL, -- denominator is the layout's dies; false: the dies measured
	cells          jsonb COMPRESSION lz4 NOT NULL, -- [{name, class, dies}] in the specification's order
	PRIMARY KEY (wafer_id, measurement_id, spec_id, measured_at)
) PARTITION BY RANGE (measured_at);
CREATE INDEX tally_spec ON tally (spec_id, measured_at DESC);

-- +goose StatementBegin
-- Makes the partitions of one month. ATTACH takes a lock that loading and
-- reading do not wait for, as CREATE … PARTITION OF would make them.
CREATE FUNCTION ensure_month(month date) RETURNS void LANGUAGE plpgsql AS $$
DECLARE
	first   date := date_trunc('month', month)::date;
	parent  text;
	part    text;
BEGIN
	PERFORM pg_advisory_xact_lock(hashtext('epitally.ensure_month'));
	FOREACH parent IN ARRAY ARRAY['measurement', 'plane', 'summary', 'small_map', 'tally'] LOOP
		part := format('%s_%s', parent, to_char(first, 'YYYY_MM'));
		IF to_regclass(part) IS NULL THEN
			EXECUTE format('CREATE TABLE %I (LIKE %I INCLUDING ALL)', part, parent);
			EXECUTE format('ALTER TABLE %I ATTACH PARTITION %I FOR VALUES FROM (%L) TO (%L)', parent, part,
				first::timestamp AT TIME ZONE 'UTC', (first + interval '1 month')::timestamp AT TIME ZONE 'UTC');
		END IF;
	END LOOP;
END $$;
-- +goose StatementEnd

-- +goose Down
DROP FUNCTION ensure_month(date);
DROP TABLE tally, small_map, summary, plane, measurement_key, measurement, die_grid, source;
DROP SEQUENCE measurement_id_seq, source_id_seq;
