package job

import (
	"context"
	"fmt"
	"os"

	"gatesill/acquire"
	"gatesill/acquire/bench"
	"gatesill/acquire/keeper"
	"gatesill/store/record"
)

// KeeperVerb is the hidden verb by which the program starts itself as keeper.
const KeeperVerb = "keeper-process"

// driver hands orders to the keeper of the supplies one after the other, away from
// the measuring loop, which must go on hearing the meters. The way off waits for
// none of them: it interrupts the one under way.
type driver struct {
	k      *keeper.Keeper
	orders chan func()
	quit   chan struct{}
	// Told gets what came of the orders; the loop reads it.
	told chan driven

	ended bool // the keeper has ended by itself
}

// driven is the outcome of one order.
type driven struct {
	what string // "gate", "drain", "off"
	set  float64
	read float64
	off  keeper.OffReport
	err  error
}

// keeperConfig says what the keeper must know of bench and part. overdrive is the
// greatest gate voltage, V, magnitude.
func keeperConfig(b *bench.Bench, part record.Part, limits acquire.Limits, log string) (keeper.Config, error) {
	c := keeper.Config{
		OffVoltage: offVoltage(part), MaxVgs: limits.Vgs, Bleed: b.Bleed.Or(0) > 0,
		Depletion: part.Mode == record.Depletion, Log: log,
	}
	found := false
	for _, s := range b.Supplies {
		k := keeper.Supply{
			Drives: s.Drives, Name: s.Name, Address: s.Path, Settings: s.Settings, Output: s.Output,
			Limit: s.CurrentLimit.Or(0), Voltage: s.Voltage.Or(0), Negative: s.Swapped, Commands: s.Commands,
		}
		if s.Drives == "gate" {
			c.Gate, found = k, true
		} else {
			c.Drain = &k
		}
	}
	if !found {
		return c, failed("gatesill help bench-file shows a [[supply]] that drives the gate", "bench file: no supply drives the gate")
	}
	return c, nil
}

// newDriver starts a keeper: one a device, so that nothing of the device before is
// left in the supplies.
func newDriver(ctx context.Context, c keeper.Config) (*driver, error) {
	exe, err := os.Executable()
	if err != nil {
		return nil, failed("", "keeper of the supplies: %w", err)
	}
	k, err := keeper.Start(ctx, exe, []string{KeeperVerb}, nil, c)
	if err != nil {
		return nil, &Failure{Code: ExitInstrument, Err: fmt.Errorf("supplies: %w", err), Hint: "look at the [[supply]] tables of the bench file, and at the supplies themselves"}
	}
	d := &driver{k: k, orders: make(chan func(), 64), quit: make(chan struct{}), told: make(chan driven, 64)}
	go d.run()
	return d, nil
}

func (d *driver) run() {
	for {
		select {
		case f := <-d.orders:
			f()
		case <-d.quit:
			return
		}
	}
}

// gate asks for a gate voltage.
func (d *driver) gate(v float64) {
	d.orders <- func() {
		read, err := d.k.Set(v)
		d.told <- driven{what: "gate", set: v, read: read, err: err}
	}
}

// drain asks for the drain supply on or off.
func (d *driver) drain(on bool) {
	d.orders <- func() { d.told <- driven{what: "drain", err: d.k.Drain(on)} }
}

// off asks for the off state.
func (d *driver) off(reason string, gone bool) {
	go func() {
		r, err := d.k.Off(reason, gone)
		d.told <- driven{what: "off", off: r, err: err}
	}()
}

// close ends the keeper, which goes to the off state first.
func (d *driver) close() error {
	close(d.quit)
	return d.k.Close()
}
