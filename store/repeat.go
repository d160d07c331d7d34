package store

import "fmt"

// Repeats is how often devices of one lot were measured again.
type Repeats struct {
	Lot   string // name
	Times int    // sweeps beyond the first of each device in each direction and session
}

// RepeatsOn lists the lots of a part with devices that were measured again within
// a session on that bench, the most often measured first. Excluded sweeps do not count.
func (tx *Tx) RepeatsOn(partID, bench string) ([]Repeats, error) {
	return all(tx, fmt.Sprintf("devices measured again on bench %q", bench), func(r row) (x Repeats, err error) {
		err = r.Scan(&x.Lot, &x.Times)
		return x, err
	}, `SELECT name, sum(n - 1) AS times FROM (
			SELECT lot.name AS name, count(*) AS n
			FROM lot JOIN device ON device.lot_id = lot.id JOIN sweep ON sweep.device_id = device.id JOIN session ON session.id = sweep.session_id
			WHERE lot.part_id = ? AND session.bench = ? AND sweep.data_hash IS NOT NULL AND NOT sweep.excluded
			GROUP BY lot.id, sweep.device_id, sweep.session_id, sweep.direction HAVING count(*) > 1)
		GROUP BY name ORDER BY times DESC, name`, partID, bench)
}
