-- The first form of a Gatesill store.
--
-- For the reader with nothing but an SQL client: start with the views at the
-- end. `point` gives every measured point as a plain row, `estimate_value`
-- every estimated number, `history` who changed what, when and why.
--
-- Numbers are in SI units; a column's name ends in its unit. NULL is 'not
-- known', never 0. Free text that nobody wrote is ''. Times are UTC, RFC 3339,
-- as text. Identifiers are UUIDs of version 7, so that the files of two benches
-- can be merged; those of bench, instrument_list and fit_procedure are the
-- beginning of the SHA-256 of what they hold, so that equal ones are one row.
-- (In tables that take many rows a CHECK spells out its alternatives: for
-- IN (...) with three or more SQLite builds a temporary table for every row.)

-- A type of transistor: what holds for every lot of it. Currents and limits are
-- magnitudes, also for a p-channel part; threshold limits and the off voltage
-- carry their sign.
CREATE TABLE part (
	id             TEXT PRIMARY KEY CHECK (length(id) = 36),
	name           TEXT NOT NULL UNIQUE CHECK (name <> ''),
	channel        TEXT NOT NULL CHECK (channel IN ('n', 'p')),
	mode           TEXT NOT NULL CHECK (mode IN ('enhancement', 'depletion')),
	off_voltage_v  REAL,
	test_current_a REAL CHECK (test_current_a > 0), -- at which the data sheet states V_GS(th)
	test_vds_v     REAL,                            -- NULL: drain tied to gate
	idle_current_a REAL CHECK (idle_current_a > 0), -- the idle (quiescent) current wanted
	vgsth_min_v    REAL,
	vgsth_max_v    REAL,
	max_vgs_v      REAL CHECK (max_vgs_v > 0),
	max_vds_v      REAL CHECK (max_vds_v > 0),
	max_id_a       REAL CHECK (max_id_a > 0),
	max_pd_w       REAL CHECK (max_pd_w > 0),
	max_temp_c     REAL,                            -- junction
	rth_k_per_w    REAL CHECK (rth_k_per_w > 0),    -- junction to case
	note           TEXT NOT NULL,
	created_at     TEXT NOT NULL CHECK (created_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z'),
	created_by     TEXT NOT NULL
) STRICT;

-- A quantity of one part that came together. The margin is the largest shift
-- that does not matter ('%' is of the idle current), the guard band lies at a
-- limit ('u' is a multiple of the standard uncertainty); both units are '' when
-- none was set. When they were set last decides whether a comparison may say so.
CREATE TABLE lot (
	id            TEXT PRIMARY KEY CHECK (length(id) = 36),
	name          TEXT NOT NULL UNIQUE CHECK (name <> ''),
	part_id       TEXT NOT NULL REFERENCES part (id),
	supplier      TEXT NOT NULL,
	date_code     TEXT NOT NULL,
	marking       TEXT NOT NULL,
	quantity      INTEGER CHECK (quantity >= 1),
	sampled       TEXT NOT NULL, -- how the sample was taken
	margin        REAL NOT NULL,
	margin_unit   TEXT NOT NULL CHECK (margin_unit IN ('', 'V', '%', 'A')),
	margin_set_at TEXT CHECK (margin_set_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z'),
	guard         REAL NOT NULL,
	guard_unit    TEXT NOT NULL CHECK (guard_unit IN ('', 'V', 'u')),
	send_back     TEXT NOT NULL CHECK (send_back IN ('', 'outside-limits', 'outside-margin')),
	decided_at    TEXT CHECK (decided_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z'), -- guard, send_back
	note          TEXT NOT NULL,
	created_at    TEXT NOT NULL CHECK (created_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z'),
	created_by    TEXT NOT NULL
) STRICT;

CREATE INDEX lot_of_part ON lot (part_id);

-- A flange. It holds one device, or two: sides A and B.
CREATE TABLE package (
	id         TEXT PRIMARY KEY CHECK (length(id) = 36),
	lot_id     TEXT NOT NULL REFERENCES lot (id),
	name       TEXT NOT NULL CHECK (name <> ''),
	created_at TEXT NOT NULL CHECK (created_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z'),
	UNIQUE (lot_id, name)
) STRICT;

-- One transistor. A control is measured again and again to see the bench drift.
CREATE TABLE device (
	id         TEXT PRIMARY KEY CHECK (length(id) = 36),
	lot_id     TEXT NOT NULL REFERENCES lot (id),
	name       TEXT NOT NULL CHECK (name <> ''), -- its serial
	package_id TEXT REFERENCES package (id),     -- NULL: a package of its own
	side       TEXT NOT NULL CHECK (side = '' OR side = 'A' OR side = 'B'),
	date_code  TEXT NOT NULL,
	marking    TEXT NOT NULL,
	tube       TEXT NOT NULL,                    -- tube, tray or reel it came in
	role       TEXT NOT NULL CHECK (role IN ('sample', 'control')),
	excluded   INTEGER NOT NULL CHECK (excluded IN (0, 1)), -- left out of every statistic
	why        TEXT NOT NULL,
	note       TEXT NOT NULL,
	created_at TEXT NOT NULL CHECK (created_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z'),
	created_by TEXT NOT NULL,
	UNIQUE (lot_id, name)
) STRICT;

CREATE UNIQUE INDEX device_of_side ON device (package_id, side) WHERE package_id IS NOT NULL AND side <> '';

-- A bench file, word for word as it was used.
CREATE TABLE bench (
	id      TEXT PRIMARY KEY CHECK (length(id) = 32), -- of name and text
	name    TEXT NOT NULL,
	text    TEXT NOT NULL,
	used_at TEXT NOT NULL CHECK (used_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z') -- first
) STRICT;

-- One sitting at one bench.
CREATE TABLE session (
	id         TEXT PRIMARY KEY CHECK (length(id) = 36),
	name       TEXT NOT NULL,
	bench      TEXT NOT NULL,
	bench_id   TEXT REFERENCES bench (id),
	operator   TEXT NOT NULL,
	fixture    TEXT NOT NULL,
	ambient_c  REAL,
	started_at TEXT CHECK (started_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]*'), -- a bare date where no time was given
	note       TEXT NOT NULL
) STRICT;

-- A file that sweeps were read from. The same file may stand here twice: it was
-- imported again on purpose.
CREATE TABLE source (
	id          TEXT PRIMARY KEY CHECK (length(id) = 36),
	lot_id      TEXT NOT NULL REFERENCES lot (id),
	name        TEXT NOT NULL,
	hash        TEXT NOT NULL CHECK (length(hash) = 64), -- SHA-256 of its bytes
	size        INTEGER NOT NULL,                        -- bytes
	layout      TEXT NOT NULL,
	dialect     TEXT NOT NULL,                           -- JSON: what was recognised
	imported_at TEXT NOT NULL CHECK (imported_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z')
) STRICT;

CREATE INDEX source_of_lot ON source (lot_id, hash);

-- The meters of a sweep as they stood on the bench, with their accuracy
-- statements, calibration dates and ranges.
CREATE TABLE instrument_list (
	id          TEXT PRIMARY KEY CHECK (length(id) = 32),
	instruments TEXT NOT NULL CHECK (json_valid(instruments))
) STRICT;

-- One pass of the gate voltage over one device: its condition, then its data.
--
-- Each data column is a JSON array with one entry a point: the decimal as it
-- was read (moved to the SI unit by its exponent), or null where there was no
-- number. NULL: the sweep has no such column. marks says why a number is missing:
-- [{"i": point from 0, "q": column, "s": "overload" | "underload" | "missing",
-- "raw": as it was written}]. source_lines says where the points stand in the
-- source: [first point, its line, number of points, lines from point to point], ...
--
-- While a sweep is being measured its data_hash is NULL; its readings stand in
-- `reading`. Once it has a data_hash its data cannot be changed any more.
CREATE TABLE sweep (
	id              TEXT PRIMARY KEY CHECK (length(id) = 36),
	device_id       TEXT NOT NULL REFERENCES device (id),
	session_id      TEXT REFERENCES session (id),
	source_id       TEXT REFERENCES source (id),
	position        INTEGER NOT NULL CHECK (position >= 1), -- measuring order in its session or file
	direction       TEXT NOT NULL CHECK (direction = 'up' OR direction = 'down' OR direction = 'spot'),
	measured_at     TEXT CHECK (measured_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]*'), -- a bare date where no time was given
	excluded        INTEGER NOT NULL CHECK (excluded IN (0, 1)),
	why             TEXT NOT NULL,
	-- the condition
	circuit         TEXT NOT NULL CHECK (circuit = '' OR circuit = 'load' OR circuit = 'diode' OR circuit = 'fixed'),
	rl_ohm          REAL CHECK (rl_ohm > 0),
	rl_tol          REAL,    -- fraction: 0.01 is 1 %
	rl_rating_w     REAL,
	vdd_nominal_v   REAL,    -- nominal, or read once
	vds_nominal_v   REAL,    -- held, in circuit 'fixed'
	ammeter         TEXT NOT NULL CHECK (ammeter = '' OR ammeter = 'drain' OR ammeter = 'source' OR ammeter = 'none'),
	burden_ohm      REAL,    -- of the ammeter
	gate_return     TEXT NOT NULL CHECK (gate_return = '' OR gate_return = 'source' OR gate_return = 'ground'), -- of the gate meter
	pulsed          TEXT NOT NULL CHECK (pulsed = '' OR pulsed = 'dc' OR pulsed = 'pulsed'),
	pulse_width_s   REAL,
	pulse_duty      REAL,    -- fraction
	pulse_delay_s   REAL,
	dwell_s         REAL,
	temp_nominal_c  REAL,
	temp_of         TEXT NOT NULL CHECK (temp_of = '' OR temp_of = 'ambient' OR temp_of = 'sink' OR temp_of = 'case'),
	spot_current_a  REAL,
	instruments_id  TEXT REFERENCES instrument_list (id),
	-- the data; the long ones last, so that a listing need not read past them
	data_hash       TEXT CHECK (length(data_hash) = 64), -- SHA-256 over columns and marks
	points          INTEGER CHECK (points >= 1),
	source_lines    TEXT,
	marks           TEXT,
	vg_v            TEXT,    -- gate to source
	id_a            TEXT,    -- drain current
	vl_v            TEXT,    -- across the load resistor
	vd_v            TEXT,    -- drain to source
	vdd_v           TEXT,    -- supply
	ig_a            TEXT,    -- gate current
	gm_s            TEXT,    -- transconductance, where a spot list gives it
	temp_c          TEXT,
	t_s             TEXT,    -- elapsed
	CHECK ((data_hash IS NULL) = (points IS NULL)),
	CHECK (data_hash IS NULL OR coalesce(vg_v, id_a, vl_v, vd_v, vdd_v, ig_a, gm_s, temp_c, t_s) IS NOT NULL)
) STRICT;

CREATE INDEX sweep_of_device ON sweep (device_id);
CREATE INDEX sweep_of_data ON sweep (data_hash);

-- What one meter said once, live, as it arrived.
CREATE TABLE reading (
	sweep_id TEXT NOT NULL REFERENCES sweep (id),
	n        INTEGER NOT NULL,  -- order of arrival in its sweep, from 1
	role     TEXT NOT NULL,     -- gate, current, load, drain, supply, temperature
	meter    TEXT NOT NULL,
	at_s     REAL NOT NULL,     -- elapsed in the session
	value    REAL,              -- in unit
	unit     TEXT NOT NULL,
	state    TEXT NOT NULL CHECK (state = '' OR state = 'overload' OR state = 'underload' OR state = 'missing'),
	raw      BLOB,              -- the frame
	PRIMARY KEY (sweep_id, n),
	CHECK ((value IS NULL) = (state <> ''))
) STRICT;

-- How estimates were made: method, all settings the result depends on besides
-- the data (JSON), version of the program.
CREATE TABLE fit_procedure (
	id       TEXT PRIMARY KEY CHECK (length(id) = 32),
	method   TEXT NOT NULL,
	settings TEXT NOT NULL CHECK (json_valid(settings)),
	version  TEXT NOT NULL
) STRICT;

-- What a fit said of one sweep. estimates: {"vgsth_V": {"value": , "u": ,
-- "u_between": , "u_absolute": , "n": }, ...}, standard uncertainties (k = 1)
-- within the session, between sessions and absolute; left out where not known.
-- remarks: [{"code": , "text": }].
CREATE TABLE estimate (
	sweep_id     TEXT NOT NULL REFERENCES sweep (id),
	procedure_id TEXT NOT NULL REFERENCES fit_procedure (id),
	data_hash    TEXT NOT NULL CHECK (length(data_hash) = 64),
	made_at      TEXT NOT NULL CHECK (made_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z'),
	state        TEXT NOT NULL,
	estimates    TEXT NOT NULL,
	remarks      TEXT CHECK (json_valid(remarks)),
	PRIMARY KEY (sweep_id, procedure_id, data_hash)
) STRICT;

-- Which column of a file was taken for what, settled once for all files with
-- the same header.
CREATE TABLE column_map (
	signature TEXT PRIMARY KEY,
	columns   TEXT NOT NULL CHECK (json_valid(columns)),
	set_at    TEXT NOT NULL CHECK (set_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z')
) STRICT;

-- The audit trail: what was changed from what to what, by whom, when and why.
CREATE TABLE change (
	id         TEXT PRIMARY KEY CHECK (length(id) = 36),
	at         TEXT NOT NULL CHECK (at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z'),
	who        TEXT NOT NULL,
	what       TEXT NOT NULL CHECK (what IN ('part', 'lot', 'device', 'sweep')),
	subject_id TEXT NOT NULL,
	field      TEXT NOT NULL, -- name of the column; 'part' and 'package' stand for part_id and package_id, by their names
	old_value  TEXT NOT NULL, -- '' was not known, or empty
	new_value  TEXT NOT NULL,
	reason     TEXT NOT NULL
) STRICT;

CREATE INDEX change_of ON change (subject_id);

-- What was measured is never changed or deleted, whoever asks. (SQLite's INSERT
-- OR REPLACE tells a DELETE trigger only with PRAGMA recursive_triggers = ON;
-- Gatesill sets it. Triggers before INSERT would cover the rest, and make every
-- import slower by half.)

CREATE TRIGGER sweep_keeps_its_id BEFORE UPDATE OF id ON sweep
BEGIN SELECT RAISE(ABORT, 'a sweep keeps its id'); END;

CREATE TRIGGER sweep_keeps_its_data
BEFORE UPDATE OF device_id, session_id, source_id, position, measured_at, data_hash, points, source_lines, marks,
	vg_v, id_a, vl_v, vd_v, vdd_v, ig_a, gm_s, temp_c, t_s ON sweep
WHEN OLD.data_hash IS NOT NULL
BEGIN SELECT RAISE(ABORT, 'the data of a sweep are never changed'); END;

CREATE TRIGGER sweep_stays BEFORE DELETE ON sweep
BEGIN SELECT RAISE(ABORT, 'a sweep is never deleted'); END;

CREATE TRIGGER reading_is_not_changed BEFORE UPDATE ON reading
BEGIN SELECT RAISE(ABORT, 'a reading is never changed'); END;

CREATE TRIGGER reading_stays BEFORE DELETE ON reading
BEGIN SELECT RAISE(ABORT, 'a reading is never deleted'); END;

CREATE TRIGGER source_is_not_changed BEFORE UPDATE ON source
BEGIN SELECT RAISE(ABORT, 'what is known of a source is never changed'); END;

CREATE TRIGGER source_stays BEFORE DELETE ON source
BEGIN SELECT RAISE(ABORT, 'what is known of a source is never deleted'); END;

CREATE TRIGGER change_is_not_changed BEFORE UPDATE ON change
BEGIN SELECT RAISE(ABORT, 'the audit trail is never changed'); END;

CREATE TRIGGER change_stays BEFORE DELETE ON change
BEGIN SELECT RAISE(ABORT, 'the audit trail is never deleted'); END;

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

-- Every estimated number as a plain row.
CREATE VIEW estimate_value AS
SELECT
	lot.name AS lot,
	device.name AS device,
	estimate.sweep_id,
	fit_procedure.method,
	fit_procedure.version,
	estimate.made_at,
	estimate.state,
	v.key AS quantity,
	v.value ->> 'value' AS value,
	v.value ->> 'u' AS u,
	v.value ->> 'u_between' AS u_between,
	v.value ->> 'u_absolute' AS u_absolute,
	coalesce(v.value ->> 'n', 0) AS n
FROM estimate
JOIN fit_procedure ON fit_procedure.id = estimate.procedure_id
JOIN sweep ON sweep.id = estimate.sweep_id
JOIN device ON device.id = sweep.device_id
JOIN lot ON lot.id = device.lot_id
JOIN json_each(estimate.estimates) AS v;

-- Who made or changed what, when and why. lot_id is NULL for a part.
CREATE VIEW history AS
SELECT created_at AS at, created_by AS who, 'part' AS what, id AS subject_id, name AS subject, NULL AS lot_id,
	'created' AS field, '' AS old_value, '' AS new_value, '' AS reason, '' AS change_id
FROM part
UNION ALL
SELECT created_at, created_by, 'lot', id, name, id, 'created', '', '', '', '' FROM lot
UNION ALL
SELECT created_at, created_by, 'device', id, name, lot_id, 'created', '', '', '', '' FROM device
UNION ALL
SELECT change.at, change.who, change.what, change.subject_id, part.name, NULL,
	change.field, change.old_value, change.new_value, change.reason, change.id
FROM change JOIN part ON part.id = change.subject_id WHERE change.what = 'part'
UNION ALL
SELECT change.at, change.who, change.what, change.subject_id, lot.name, lot.id,
	change.field, change.old_value, change.new_value, change.reason, change.id
FROM change JOIN lot ON lot.id = change.subject_id WHERE change.what = 'lot'
UNION ALL
SELECT change.at, change.who, change.what, change.subject_id, device.name, device.lot_id,
	change.field, change.old_value, change.new_value, change.reason, change.id
FROM change JOIN device ON device.id = change.subject_id WHERE change.what = 'device'
UNION ALL
SELECT change.at, change.who, change.what, change.subject_id, device.name, device.lot_id,
	change.field, change.old_value, change.new_value, change.reason, change.id
FROM change JOIN sweep ON sweep.id = change.subject_id JOIN device ON device.id = sweep.device_id
WHERE change.what = 'sweep';
