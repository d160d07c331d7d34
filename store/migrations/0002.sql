-- Live readings: what a display resolved and why a reading cannot be used; how
-- well the meters of a point were brought to one instant; what happened in a
-- session besides.

ALTER TABLE reading ADD COLUMN digit REAL;                       -- one count of the display, in unit
ALTER TABLE reading ADD COLUMN refused TEXT NOT NULL DEFAULT ''; -- why it cannot stand for the quantity, '' when it can

ALTER TABLE sweep ADD COLUMN pair_bound_v TEXT; -- greatest error of vg_v from pairing meters that do not read at one instant
ALTER TABLE sweep ADD COLUMN settled TEXT;      -- 1: a mean while all stood still, 0: interpolated between readings, 2: as 1, taken again at low power after the sweep

CREATE TABLE event (
	session_id TEXT NOT NULL REFERENCES session (id),
	sweep_id   TEXT REFERENCES sweep (id), -- NULL: not in a sweep
	at_s       REAL NOT NULL,              -- elapsed in the session
	kind       TEXT NOT NULL CHECK (kind <> ''),
	text       TEXT NOT NULL
) STRICT;

CREATE INDEX event_of_session ON event (session_id);

CREATE TRIGGER event_is_not_changed BEFORE UPDATE ON event
BEGIN SELECT RAISE(ABORT, 'an event is never changed'); END;

CREATE TRIGGER event_stays BEFORE DELETE ON event
BEGIN SELECT RAISE(ABORT, 'an event is never deleted'); END;

DROP TRIGGER sweep_keeps_its_data;
CREATE TRIGGER sweep_keeps_its_data
BEFORE UPDATE OF device_id, session_id, source_id, position, measured_at, data_hash, points, source_lines, marks,
	vg_v, id_a, vl_v, vd_v, vdd_v, ig_a, gm_s, temp_c, t_s, pair_bound_v, settled ON sweep
WHEN OLD.data_hash IS NOT NULL
BEGIN SELECT RAISE(ABORT, 'the data of a sweep are never changed'); END;

DROP VIEW point;

-- Every measured point as a plain row; i counts from 0. state lists the columns
-- without a number and why; source_line is the line of the source file.
CREATE VIEW point AS
SELECT
	lot.name AS lot,
	device.name AS device,
	sweep.id AS sweep_id,
	sweep.position,
	sweep.direction,
	p.key AS i,
	sweep.vg_v ->> p.key AS vg_v,
	sweep.id_a ->> p.key AS id_a,
	sweep.vl_v ->> p.key AS vl_v,
	sweep.vd_v ->> p.key AS vd_v,
	sweep.vdd_v ->> p.key AS vdd_v,
	sweep.ig_a ->> p.key AS ig_a,
	sweep.gm_s ->> p.key AS gm_s,
	sweep.temp_c ->> p.key AS temp_c,
	sweep.t_s ->> p.key AS t_s,
	sweep.pair_bound_v ->> p.key AS pair_bound_v,
	sweep.settled ->> p.key AS settled,
	(
		SELECT group_concat((m.value ->> 'q') || ' ' || (m.value ->> 's'), ', ')
		FROM json_each(sweep.marks) AS m
		WHERE m.value ->> 'i' = p.key
	) AS state,
	(
		SELECT (r.value ->> 1) + (p.key - (r.value ->> 0)) * (r.value ->> 3)
		FROM json_each(sweep.source_lines) AS r
		WHERE p.key >= r.value ->> 0 AND p.key < (r.value ->> 0) + (r.value ->> 2)
	) AS source_line
FROM sweep
JOIN device ON device.id = sweep.device_id
JOIN lot ON lot.id = device.lot_id
JOIN json_each(coalesce(sweep.vg_v, sweep.id_a, sweep.vl_v, sweep.vd_v, sweep.vdd_v,
	sweep.ig_a, sweep.gm_s, sweep.temp_c, sweep.t_s)) AS p;
