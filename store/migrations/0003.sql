-- Sets of devices that belong together, locked so that none is given out twice.

-- A set is reserved, then used in a unit, or released, which gives its devices
-- free again; released is the end of it. What it was matched by, and what its
-- devices had then, is never changed; name, state, unit and the last reason are, by
-- the audit trail.
CREATE TABLE device_set (
	id                  TEXT PRIMARY KEY CHECK (length(id) = 36),
	number              INTEGER NOT NULL UNIQUE CHECK (number >= 1), -- counts in this store
	name                TEXT NOT NULL UNIQUE CHECK (name <> ''),
	state               TEXT NOT NULL CHECK (state IN ('reserved', 'used', 'released')),
	unit                TEXT NOT NULL,                          -- what it is for, or was built into
	reason              TEXT NOT NULL,                          -- of the state
	at_a                REAL CHECK (at_a > 0),                  -- current of one device at which it was matched
	source_resistor_ohm REAL CHECK (source_resistor_ohm >= 0),  -- of each device
	criteria            TEXT NOT NULL CHECK (json_valid(criteria)), -- [{"quantity": , "within": , "weight": }], the first leads
	spread_v            REAL CHECK (spread_v >= 0),             -- greatest less least of the first
	created_at          TEXT NOT NULL CHECK (created_at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z'),
	created_by          TEXT NOT NULL
) STRICT;

-- A device of a set. readings: {"vgs_idle_V": {"value": , "u": , ...}, ...} as in
-- estimate, as they were when the set was made.
CREATE TABLE set_member (
	set_id    TEXT NOT NULL REFERENCES device_set (id),
	position  INTEGER NOT NULL CHECK (position >= 1),
	device_id TEXT NOT NULL REFERENCES device (id),
	readings  TEXT NOT NULL CHECK (json_valid(readings)),
	PRIMARY KEY (set_id, position),
	UNIQUE (set_id, device_id)
) STRICT;

CREATE INDEX set_of_device ON set_member (device_id);

-- A device is in one set at a time: released sets do not count, and never come
-- back.
CREATE TRIGGER set_member_is_free BEFORE INSERT ON set_member
WHEN EXISTS (
	SELECT 1 FROM set_member JOIN device_set ON device_set.id = set_member.set_id
	WHERE set_member.device_id = NEW.device_id AND device_set.state <> 'released')
BEGIN SELECT RAISE(ABORT, 'the device is in a set already'); END;

CREATE TRIGGER set_member_joins_at_once BEFORE INSERT ON set_member
WHEN (SELECT state FROM device_set WHERE id = NEW.set_id) <> 'reserved'
BEGIN SELECT RAISE(ABORT, 'no device joins a set that is used or released'); END;

CREATE TRIGGER set_member_is_not_changed BEFORE UPDATE ON set_member
BEGIN SELECT RAISE(ABORT, 'what is in a set is never changed'); END;

CREATE TRIGGER set_member_stays BEFORE DELETE ON set_member
BEGIN SELECT RAISE(ABORT, 'what is in a set is never deleted'); END;

CREATE TRIGGER device_set_keeps_its_match
BEFORE UPDATE OF id, at_a, source_resistor_ohm, criteria, spread_v, created_at, created_by ON device_set
BEGIN SELECT RAISE(ABORT, 'what a set was matched by is never changed'); END;

CREATE TRIGGER device_set_stays_released BEFORE UPDATE OF state ON device_set
WHEN OLD.state = 'released' AND NEW.state <> 'released'
BEGIN SELECT RAISE(ABORT, 'a released set does not come back'); END;

CREATE TRIGGER device_set_stays BEFORE DELETE ON device_set
BEGIN SELECT RAISE(ABORT, 'a set is never deleted'); END;

-- Sets with their devices as plain rows.
CREATE VIEW device_in_set AS
SELECT
	device_set.number,
	device_set.name AS set_name,
	device_set.state,
	device_set.unit,
	lot.name AS lot,
	device.name AS device,
	v.key AS quantity,
	v.value ->> 'value' AS value,
	v.value ->> 'u' AS u
FROM set_member
JOIN device_set ON device_set.id = set_member.set_id
JOIN device ON device.id = set_member.device_id
JOIN lot ON lot.id = device.lot_id
JOIN json_each(set_member.readings) AS v;

-- The audit trail takes sets as well.
DROP VIEW history;

CREATE TABLE new_change (
	id         TEXT PRIMARY KEY CHECK (length(id) = 36),
	at         TEXT NOT NULL CHECK (at GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]T*Z'),
	who        TEXT NOT NULL,
	what       TEXT NOT NULL CHECK (what IN ('part', 'lot', 'device', 'sweep', 'set')),
	subject_id TEXT NOT NULL,
	field      TEXT NOT NULL, -- name of the column; 'part' and 'package' stand for part_id and package_id, by their names
	old_value  TEXT NOT NULL, -- '' was not known, or empty
	new_value  TEXT NOT NULL,
	reason     TEXT NOT NULL
) STRICT;
INSERT INTO new_change SELECT id, at, who, what, subject_id, field, old_value, new_value, reason FROM change;
DROP TABLE change;
ALTER TABLE new_change RENAME TO change;

CREATE INDEX change_of ON change (subject_id);

CREATE TRIGGER change_is_not_changed BEFORE UPDATE ON change
BEGIN SELECT RAISE(ABORT, 'the audit trail is never changed'); END;

CREATE TRIGGER change_stays BEFORE DELETE ON change
BEGIN SELECT RAISE(ABORT, 'the audit trail is never deleted'); END;

-- Who made or changed what, when and why. lot_id is NULL for a part and a set.
CREATE VIEW history AS
SELECT created_at AS at, created_by AS who, 'part' AS what, id AS subject_id, name AS subject, NULL AS lot_id,
	'created' AS field, '' AS old_value, '' AS new_value, '' AS reason, '' AS change_id
FROM part
UNION ALL
SELECT created_at, created_by, 'lot', id, name, id, 'created', '', '', '', '' FROM lot
UNION ALL
SELECT created_at, created_by, 'device', id, name, lot_id, 'created', '', '', '', '' FROM device
UNION ALL
SELECT created_at, created_by, 'set', id, name, NULL, 'created', '', '', '', '' FROM device_set
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
WHERE change.what = 'sweep'
UNION ALL
SELECT change.at, change.who, change.what, change.subject_id, device_set.name, NULL,
	change.field, change.old_value, change.new_value, change.reason, change.id
FROM change JOIN device_set ON device_set.id = change.subject_id WHERE change.what = 'set';
