-- SQL stays open: any client reads dies as rows.

-- +goose Up
-- +goose StatementBegin
CREATE FUNCTION plane_values(encoding smallint, base double precision, resolution double precision, n integer, data bytea)
RETURNS double precision[] LANGUAGE plpgsql IMMUTABLE STRICT PARALLEL SAFE AS $$
DECLARE
	bytes   bytea := data || ''::bytea; -- detoasted once, not once per get_byte
	vals    double precision[] := array_fill(NULL::double precision, ARRAY[n]);
	base_k  bigint;
	divisor double precision; -- a division by 10^d is correctly rounded, a product with 10^-d is not
	k       bigint;
	e       integer;
	m       double precision;
BEGIN
	IF encoding IN (1, 2) THEN
		base_k := round(base / resolution)::bigint;
		divisor := CASE WHEN resolution < 1 THEN round(1 / resolution) END;
	END IF;
	IF encoding = 1 THEN
		FOR i IN 0 .. n - 1 LOOP
			k := get_byte(bytes, i) + 256 * get_byte(bytes, n + i);
			CONTINUE WHEN k = 32768;
			k := base_k + CASE WHEN k > 32767 THEN k - 65536 ELSE k END;
			vals[i + 1] := CASE WHEN divisor IS NULL THEN k * resolution ELSE k / divisor END;
		END LOOP;
	ELSIF encoding = 2 THEN
		FOR i IN 0 .. n - 1 LOOP
			k := get_byte(bytes, i) + 256 * get_byte(bytes, n + i) + 65536 * get_byte(bytes, 2 * n + i)
				+ 16777216::bigint * get_byte(bytes, 3 * n + i);
			CONTINUE WHEN k = 2147483648;
			k := base_k + CASE WHEN k > 2147483647 THEN k - 4294967296 ELSE k END;
			vals[i + 1] := CASE WHEN divisor IS NULL THEN k * resolution ELSE k / divisor END;
		END LOOP;
	ELSIF encoding = 3 THEN -- IEEE 754 binary32, from its bits
		FOR i IN 0 .. n - 1 LOOP
			e := (get_byte(bytes, 3 * n + i) & 127) * 2 + (get_byte(bytes, 2 * n + i) >> 7);
			m := get_byte(bytes, i) + 256 * get_byte(bytes, n + i) + 65536 * (get_byte(bytes, 2 * n + i) & 127);
			CONTINUE WHEN e = 255 AND m <> 0;
			m := CASE WHEN e = 255 THEN 'Infinity'::double precision
				WHEN e = 0 THEN m * power(2::double precision, -149)
				ELSE (1 + m / 8388608) * power(2::double precision, e - 127) END;
			vals[i + 1] := CASE WHEN get_byte(bytes, 3 * n + i) > 127 THEN -m ELSE m END;
		END LOOP;
	ELSIF encoding = 4 THEN -- IEEE 754 binary64
		FOR i IN 0 .. n - 1 LOOP
			e := (get_byte(bytes, 7 * n + i) & 127) * 16 + (get_byte(bytes, 6 * n + i) >> 4);
			m := get_byte(bytes, i) + 256::double precision * get_byte(bytes, n + i) + 65536::double precision * get_byte(bytes, 2 * n + i)
				+ 16777216::double precision * get_byte(bytes, 3 * n + i) + 4294967296::double precision * get_byte(bytes, 4 * n + i)
				+ 1099511627776::double precision * get_byte(bytes, 5 * n + i) + 281474976710656::double precision * (get_byte(bytes, 6 * n + i) & 15);
			CONTINUE WHEN e = 2047 AND m <> 0;
			m := CASE WHEN e = 2047 THEN 'Infinity'::double precision
				WHEN e = 0 THEN (m / 4503599627370496) * power(2::double precision, -1022)
				ELSE (1 + m / 4503599627370496) * power(2::double precision, e - 1023) END;
			vals[i + 1] := CASE WHEN get_byte(bytes, 7 * n + i) > 127 THEN -m ELSE m END;
		END LOOP;
	ELSE
		RAISE EXCEPTION 'plane encoding % is not known', encoding;
	END IF;
	RETURN vals;
END $$;
-- +goose StatementEnd
COMMENT ON FUNCTION plane_values IS 'the values of a plane in the order of its die grid; null is no value';

-- +goose StatementBegin
CREATE FUNCTION die_grid_coordinates(runs bytea, OUT x smallint[], OUT y smallint[]) LANGUAGE plpgsql IMMUTABLE STRICT PARALLEL SAFE AS $$
DECLARE
	bytes bytea := runs || ''::bytea;
	total integer := 0;
	i     integer := 1;
	p     integer;
	x0    integer;
	y0    integer;
	c     integer;
BEGIN
	FOR r IN 0 .. length(bytes) / 8 - 1 LOOP
		total := total + get_byte(bytes, 8 * r + 4) + 256 * get_byte(bytes, 8 * r + 5) + 65536 * get_byte(bytes, 8 * r + 6);
	END LOOP;
	x := array_fill(0::smallint, ARRAY[total]);
	y := x;
	FOR r IN 0 .. length(bytes) / 8 - 1 LOOP
		p := 8 * r;
		x0 := get_byte(bytes, p) + 256 * get_byte(bytes, p + 1);
		y0 := get_byte(bytes, p + 2) + 256 * get_byte(bytes, p + 3);
		c := get_byte(bytes, p + 4) + 256 * get_byte(bytes, p + 5) + 65536 * get_byte(bytes, p + 6);
		x0 := CASE WHEN x0 > 32767 THEN x0 - 65536 ELSE x0 END;
		y0 := CASE WHEN y0 > 32767 THEN y0 - 65536 ELSE y0 END;
		FOR j IN 0 .. c - 1 LOOP
			x[i] := x0 + j;
			y[i] := y0;
			i := i + 1;
		END LOOP;
	END LOOP;
END $$;
-- +goose StatementEnd

CREATE VIEW die_reading AS
SELECT w.name AS wafer, m.id AS measurement, d.x, d.y, p.quantity, d.value
FROM plane p
JOIN measurement m ON m.wafer_id = p.wafer_id AND m.id = p.measurement_id AND m.measured_at = p.measured_at
JOIN wafer w ON w.id = m.wafer_id
JOIN die_grid g ON g.id = m.grid_id
CROSS JOIN LATERAL die_grid_coordinates(g.runs) c
CROSS JOIN LATERAL unnest(c.x, c.y, plane_values(p.encoding, p.base, p.resolution, p.n, p.data)) AS d(x, y, value);
COMMENT ON VIEW die_reading IS 'one row per die and quantity; name a wafer or a measurement, or it decodes every plane there is';

-- +goose Down
DROP VIEW die_reading;
DROP FUNCTION die_grid_coordinates(bytea);
DROP FUNCTION plane_values(smallint, double precision, double precision, integer, bytea);
