package store

import (
	"encoding/json"
	"errors"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// TestRawDataStay tries to change and to delete what was measured, with SQLite
// alone.
func TestRawDataStay(t *testing.T) {
	path, lot, sweeps := closedStore(t)
	db, err := Open(background, path, Options{})
	require.NoError(t, err)
	update(t, db, func(tx *Tx) {
		require.NoError(t, tx.AddSource(&record.Source{LotID: lot.ID, Name: "a.csv", Hash: sweeps[0].DataHash, Dialect: "{}"}))
		live := record.Sweep{DeviceID: sweeps[0].DeviceID, Position: 1, Direction: record.Up}
		require.NoError(t, tx.StartSweep(&live))
		require.NoError(t, tx.AddReadings([]record.Reading{{SweepID: live.ID, Value: record.Known(1), Unit: "V"}}))
		require.NoError(t, tx.RenameLot(lot.ID, "B", "r"))
	})
	require.NoError(t, db.Close())

	pool := raw(t, path)
	refuse := func(statement, says string) {
		t.Helper()
		_, err := pool.Exec(statement)
		require.ErrorContains(t, err, says, statement)
	}
	for _, column := range []string{"data_hash", "points", "source_lines", "marks", "device_id", "position", "measured_at", "session_id", "source_id"} {
		refuse("UPDATE sweep SET "+column+" = NULL", "never changed")
	}
	for _, q := range record.Quantities {
		refuse("UPDATE sweep SET "+string(q)+" = '[1]'", "never changed")
	}
	refuse("UPDATE sweep SET id = '"+lot.ID+"' WHERE data_hash IS NULL", "keeps its id")
	refuse("DELETE FROM sweep", "never deleted")
	refuse("UPDATE reading SET value = 2", "never changed")
	refuse("DELETE FROM reading", "never deleted")
	refuse("UPDATE source SET hash = hash", "never changed")
	refuse("DELETE FROM source", "never deleted")
	refuse("UPDATE change SET reason = 'another'", "never changed")
	refuse("DELETE FROM change", "never deleted")

	db = openStore(t, path, Options{})
	for _, table := range []string{"sweep", "reading", "source", "change"} {
		_, err := db.writes.Exec("INSERT OR REPLACE INTO " + table + " SELECT * FROM " + table)
		require.ErrorContains(t, err, "never", "in place of a row")
	}
	for _, table := range []string{"device", "lot", "part"} { // what others belong to
		_, err := db.writes.Exec("DELETE FROM " + table)
		require.ErrorIs(t, named(err), ErrNotFound)
	}
	holds(t, db, lot, sweeps)
}

// The database itself refuses what is no value of a column.
func TestConstraints(t *testing.T) {
	db := newStore(t)
	_, sweeps := fill(t, db)
	for _, set := range []string{
		"part SET channel = 'N'", "part SET mode = 'x'", "part SET test_current_a = 0", "part SET idle_current_a = -1", "part SET name = ''",
		"part SET name = NULL", "part SET max_vgs_v = 'much'", "part SET created_at = 'now'", "lot SET quantity = 0", "lot SET margin_unit = 'u'",
		"lot SET guard_unit = '%'", "lot SET send_back = 'yes'", "lot SET margin_set_at = '6.5.24'", "device SET side = 'C'",
		"device SET role = 'spare'", "device SET excluded = 2", "sweep SET direction = 'x'", "sweep SET circuit = 'x'", "sweep SET ammeter = 'x'",
		"sweep SET gate_return = 'x'", "sweep SET pulsed = 'x'", "sweep SET temp_of = 'x'", "sweep SET rl_ohm = 0", "sweep SET excluded = 2",
	} {
		_, err := db.writes.Exec("UPDATE " + set)
		require.ErrorIs(t, named(err), record.ErrInvalid, set)
	}
	for _, set := range []string{"lot SET part_id = 'x'", "device SET lot_id = 'x'", "sweep SET instruments_id = 'x'"} {
		_, err := db.writes.Exec("UPDATE " + set)
		require.ErrorIs(t, named(err), ErrNotFound, set)
	}
	_, err := db.writes.Exec("UPDATE sweep SET id_a = NULL, vg_v = NULL, data_hash = data_hash WHERE id = ?", sweeps[0].ID)
	require.ErrorContains(t, err, "never changed")
}

// viewStore has one lot with everything that the views show.
func viewStore(t *testing.T) (path string, s record.Sweep) {
	t.Helper()
	path = filepath.Join(t.TempDir(), "gatesill.db")
	db, err := Open(background, path, Options{Create: true, Who: "tester"})
	require.NoError(t, err)
	update(t, db, func(tx *Tx) {
		_, ds := addLot(t, tx, "A", 2)
		plain := invented(ds[1].ID, 2)
		plain.Columns[1].Text = []byte("[0.00,1.0e-4]")
		plain.Columns = append(plain.Columns[1:], record.Column{Quantity: record.VD, Values: []float64{5, 6}}) // no gate voltage
		plain.Columns[0].Values[1] = 1e-4
		ss := []record.Sweep{fullSweep(ds[0].ID, "", ""), plain}
		require.NoError(t, tx.AddSweeps(ss))
		s = ss[0]
		require.NoError(t, tx.PutEstimates([]record.Estimate{inventedEstimate(s, "current", "2024-05-06T00:00:00.000Z")}))
		ds[0].Note = "x"
		require.NoError(t, tx.PutDevice(&ds[0], "r"))
	})
	require.NoError(t, db.Close())
	return path, s
}

// viewQueries, and the rows that they give, fields joined by |, NULL empty.
var viewQueries = []struct{ query, want string }{
	{`SELECT lot, device, position, direction, i, vg_v, id_a, vl_v, vd_v, vdd_v, ig_a, gm_s, temp_c, t_s, state, source_line FROM point ORDER BY device, i`, `
A|D0001|7|down|0|3.0|0.0012|0.012|1.0|1.0|1.0|1.0|1.0|1.0||5
A|D0001|7|down|1|3.01||0.02|2|2|2|2|2|2|id_a overload|6
A|D0001|7|down|2|3.02|0.0031|0.031|||||||t_s missing|9
A|D0002|1|up|0||0.0||5|||||||
A|D0002|1|up|1||0.0001||6|||||||`},
	{`SELECT count(*), sum(id_a) FROM point WHERE device = 'D0001' AND vg_v > 3.005`, `
2|0.0031`},
	{`SELECT lot, device, method, version, made_at, state, quantity, value, u, u_between, u_absolute, n FROM estimate_value ORDER BY quantity`, `
A|D0001|current|1|2024-05-06T00:00:00.000Z|measured|idss_A|||||0
A|D0001|current|1|2024-05-06T00:00:00.000Z|measured|vgsth_V|3.0123456789|0.0004|0.002|0.01|4
A|D0001|current|1|2024-05-06T00:00:00.000Z|measured|vt_V|-2.5e-300||||1`},
	{`SELECT who, what, subject, field, old_value, new_value, reason FROM history ORDER BY what, subject, field`, `
tester|device|D0001|created|||
tester|device|D0001|note||x|r
tester|device|D0002|created|||
tester|lot|A|created|||
tester|part|invented part|created|||`},
}

func TestViewsByDriver(t *testing.T) {
	path, _ := viewStore(t)
	pool := raw(t, path)
	for _, q := range viewQueries {
		rows, err := pool.Query(q.query)
		require.NoError(t, err)
		columns, err := rows.Columns()
		require.NoError(t, err)
		var got []string
		for rows.Next() {
			fields := make([]string, len(columns))
			to := make([]any, len(columns))
			for i := range to {
				to[i] = scanned{&fields[i]}
			}
			require.NoError(t, rows.Scan(to...))
			got = append(got, strings.Join(fields, "|"))
		}
		require.NoError(t, rows.Err())
		require.NoError(t, rows.Close())
		require.Equal(t, plainRows(q.want), plainRows(strings.Join(got, "\n")), q.query)
	}
}

// scanned takes any value as text, as the command prints it.
type scanned struct{ to *string }

func (s scanned) Scan(src any) error {
	*s.to = asText(src)
	if x, ok := src.(float64); ok && x == float64(int64(x)) {
		*s.to += ".0"
	}
	return nil
}

func plainRows(s string) []string { return strings.Split(strings.TrimSpace(s), "\n") }

// TestViewsByCommand reads the store with the sqlite3 command, which knows
// nothing of Gatesill.
func TestViewsByCommand(t *testing.T) {
	command, err := exec.LookPath("sqlite3")
	if err != nil {
		t.Skip("no sqlite3 command here")
	}
	path, s := viewStore(t)
	run := func(args ...string) string {
		t.Helper()
		out, err := exec.Command(command, append([]string{"-readonly", path}, args...)...).Output()
		var failed *exec.ExitError
		if errors.As(err, &failed) {
			t.Fatalf("sqlite3 %v: %s", args, failed.Stderr)
		}
		require.NoError(t, err)
		return string(out)
	}
	if v := run("SELECT sqlite_version() < '3.38' AND length(sqlite_version()) >= 6"); strings.TrimSpace(v) == "1" {
		t.Skip("the sqlite3 command is too old for the operator ->>")
	}
	for _, q := range viewQueries {
		require.Equal(t, plainRows(q.want), plainRows(run(q.query)), q.query)
	}
	require.Equal(t, "ok\n", run("PRAGMA integrity_check"))
	require.Equal(t, string(s.Column(record.ID).Text)+"\n", run("SELECT id_a FROM sweep WHERE id = '"+s.ID+"'"), "the decimals as they were read")
	var instruments []record.Instrument
	require.NoError(t, json.Unmarshal([]byte(run("SELECT instruments FROM instrument_list")), &instruments))
	require.Equal(t, s.Instruments, instruments)
}
