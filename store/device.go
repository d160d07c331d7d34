package store

import (
	"fmt"
	"slices"

	"gatesill/store/record"
)

const deviceColumns = `lot_id, name, package_id, side, date_code, marking, tube, role, excluded, why, note`

var deviceKind = newKind("device", deviceColumns)

func deviceValues(d *record.Device) []any {
	return []any{d.LotID, d.Name, ref{d.PackageID, d.Package}, d.Side, d.DateCode, d.Marking, d.Tube, string(d.Role), d.Excluded, d.Why, d.Note}
}

const selectDevice = `SELECT d.id, d.created_at, d.lot_id, d.name, d.package_id, p.name, d.side, d.date_code, d.marking, d.tube,
		d.role, d.excluded, d.why, d.note
	FROM device AS d LEFT JOIN package AS p ON p.id = d.package_id `

func scanDevice(r row) (d record.Device, err error) {
	err = r.Scan(&d.ID, stamp{&d.CreatedAt}, &d.LotID, &d.Name, maybe{&d.PackageID}, maybe{&d.Package}, &d.Side, &d.DateCode,
		&d.Marking, &d.Tube, &d.Role, &d.Excluded, &d.Why, &d.Note)
	return d, err
}

// Devices lists the devices of a lot by name, D2 before D10.
func (tx *Tx) Devices(lotID string) ([]record.Device, error) {
	list, err := all(tx, "devices of lot "+lotID, scanDevice, selectDevice+`WHERE d.lot_id = ?`, lotID)
	slices.SortFunc(list, func(a, b record.Device) int { return record.NaturalCompare(a.Name, b.Name) })
	return list, err
}

// Device finds a device of a lot by its name, or gives [ErrNotFound].
func (tx *Tx) Device(lotID, name string) (record.Device, error) {
	return one(tx, fmt.Sprintf("device %q", name), scanDevice, selectDevice+`WHERE d.lot_id = ? AND d.name = ?`, lotID, name)
}

// DeviceByID finds a device by its id, or gives [ErrNotFound].
func (tx *Tx) DeviceByID(id string) (record.Device, error) {
	return one(tx, "device "+id, scanDevice, selectDevice+`WHERE d.id = ?`, id)
}

// FindDevices lists the devices of that name in all lots, none when there are
// none.
func (tx *Tx) FindDevices(name string) ([]record.Device, error) {
	return all(tx, fmt.Sprintf("device %q", name), scanDevice, selectDevice+`WHERE d.name = ? ORDER BY d.id`, name)
}

// AddDevices adds devices to a lot and fills ID, LotID, CreatedAt and PackageID
// in place; a device without a role is a sample. A device with a Package name joins the package of that name, which
// is made where it is absent. A name that the lot has already is refused with
// [ErrExists], and so is a side that another device of the package has.
func (tx *Tx) AddDevices(lotID string, ds []record.Device) error {
	packages, err := tx.packages(lotID)
	if err != nil {
		return err
	}
	insert, err := tx.sql.PrepareContext(tx.ctx, `INSERT INTO device (id, created_at, created_by, `+deviceColumns+`)
		VALUES (`+places(3+len(deviceKind.columns))+`)`)
	if err != nil {
		return tx.fail("devices", err)
	}
	defer insert.Close()
	now := record.Now()
	for i := range ds {
		d := &ds[i]
		if d.Role == "" {
			d.Role = record.Sample
		}
		if err := d.Validate(); err != nil {
			return err
		}
		if err := newID(&d.ID); err != nil {
			return err
		}
		d.LotID, d.CreatedAt = lotID, now
		if err := tx.intoPackage(d, packages); err != nil {
			return err
		}
		if _, err := insert.ExecContext(tx.ctx, append([]any{d.ID, d.CreatedAt, tx.who}, deviceValues(d)...)...); err != nil {
			return tx.fail(deviceNoun(d), err)
		}
	}
	return nil
}

func deviceNoun(d *record.Device) string {
	if d.Package != "" && d.Side != "" {
		return fmt.Sprintf("device %q, package %q side %s", d.Name, d.Package, d.Side)
	}
	return fmt.Sprintf("device %q", d.Name)
}

// packages gives the ids of a lot's packages by name.
func (tx *Tx) packages(lotID string) (map[string]string, error) {
	list, err := all(tx, "packages", func(r row) (p [2]string, err error) {
		err = r.Scan(&p[0], &p[1])
		return p, err
	}, `SELECT name, id FROM package WHERE lot_id = ?`, lotID)
	byName := make(map[string]string, len(list))
	for _, p := range list {
		byName[p[0]] = p[1]
	}
	return byName, err
}

// intoPackage sets d.PackageID to the package of its name, which it makes where
// it is not among packages.
func (tx *Tx) intoPackage(d *record.Device, packages map[string]string) error {
	if d.Package == "" {
		d.PackageID = ""
		return nil
	}
	if err := record.CheckName("package", d.Package); err != nil {
		return fmt.Errorf("device %q: %w", d.Name, err)
	}
	id, ok := packages[d.Package]
	if !ok {
		if err := newID(&id); err != nil {
			return err
		}
		if err := tx.exec(fmt.Sprintf("package %q", d.Package), `INSERT INTO package (id, lot_id, name, created_at) VALUES (?, ?, ?, ?)`,
			id, d.LotID, d.Package, record.Now()); err != nil {
			return err
		}
		packages[d.Package] = id
	}
	d.PackageID = id
	return nil
}

// PutDevice changes the device with d.ID; every changed field goes to the audit
// trail with its old value. Package is what counts, PackageID follows it. An
// unknown ID is [ErrNotFound]; a name that another device of the lot has is
// [ErrExists]. A device stays in its lot.
func (tx *Tx) PutDevice(d *record.Device, reason string) error {
	if err := d.Validate(); err != nil {
		return err
	}
	old, err := tx.DeviceByID(d.ID)
	if err != nil {
		return err
	}
	if d.LotID != old.LotID {
		return fmt.Errorf("device %q: cannot move to another lot: %w", d.Name, record.ErrInvalid)
	}
	packages, err := tx.packages(d.LotID)
	if err != nil {
		return err
	}
	if err := tx.intoPackage(d, packages); err != nil {
		return err
	}
	d.CreatedAt = old.CreatedAt
	return deviceKind.update(tx, deviceNoun(d), d.ID, reason, deviceValues(&old), deviceValues(d))
}
