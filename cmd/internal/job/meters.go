package job

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"time"

	"gatesill/acquire"
	"gatesill/acquire/bench"
	"gatesill/acquire/port"
	"gatesill/acquire/rehearsal"
	"gatesill/acquire/table"
	"gatesill/report"
	"gatesill/report/screen"
)

// MetersRequest is what "gatesill meters" was asked for.
type MetersRequest struct {
	Bench     string        // bench file; "": what is plugged in is listed
	Write     string        // bench file to be written from answers
	Rehearsal bool          // a bench that does not exist
	Faults    []Fault       // that it shall have
	For       time.Duration // how long is listened; 0: 3 s, on a terminal until a key

	Keyboard func() (keys <-chan rune, restore func(), err error) // nil, or no keys: nothing is drawn live
	Size     func() (width, height int)
	Draw     io.Writer // the terminal that is drawn on
}

// usualListening is long enough for the slowest handheld to have said several readings.
const usualListening = 3 * time.Second

// Meters lists what is plugged in, or shows what the meters of a bench say, or
// writes a bench file.
func Meters(ctx context.Context, env *Env, rq MetersRequest) error {
	switch {
	case rq.Write != "" && (rq.Bench != "" || rq.Rehearsal):
		return Usage("gatesill meters --write FILE, then gatesill meters --bench FILE", "--write makes a bench file and goes with neither --bench nor --rehearsal")
	case rq.Bench != "" && rq.Rehearsal:
		return Usage("leave one of them out", "--rehearsal brings a bench of its own and goes without --bench")
	case rq.For < 0:
		return Usage("--for 5s", "--for %v: no time", rq.For)
	case rq.Write != "":
		return writeBench(ctx, env, rq.Write)
	case rq.Rehearsal:
		return rehearseMeters(ctx, env, rq)
	case rq.Bench == "":
		return listPorts(env)
	}
	b, err := readBench(rq.Bench)
	if err != nil {
		return err
	}
	if typed, err := typedBench(b); err != nil {
		return err
	} else if typed {
		return failed("gatesill sweep LOT --bench "+Quote(rq.Bench)+" asks for them", "bench file %s: the readings are typed, there is nothing to listen to", report.Clean(rq.Bench))
	}
	return watchMeters(ctx, env, b, rq)
}

// rehearseMeters shows three simulated handhelds, with a device in the fixture and
// its gate being turned up.
func rehearseMeters(ctx context.Context, env *Env, rq MetersRequest) (err error) {
	c, err := rehearsal.Standard(rehearsal.Handheld)
	if err != nil {
		return failed("", "%w", err)
	}
	if err := checkFaults(rq.Faults, c); err != nil {
		return err
	}
	r, err := rehearse(ctx, c)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, r.close()) }()
	for _, f := range rq.Faults {
		env.talk("%s", tellFault(f))
		if f.Start || f.At == 0 {
			if err := r.Fault(f.Fault); err != nil {
				return failed("", "%w", err)
			}
			continue
		}
		later := time.AfterFunc(time.Duration(f.At*float64(time.Second)), func() { _ = r.Fault(f.Fault) }) // fails only with the bench itself
		defer later.Stop()
	}
	if err := errors.Join(r.insert(c.Devices[0].Name), r.Knob(2.8, 0), r.Knob(3.3, 0.01)); err != nil {
		return failed("", "rehearsal: %w", err)
	}
	return watchMeters(ctx, env, r.bench, rq)
}

// readBench reads a bench file that is to be listened to.
func readBench(path string) (*bench.Bench, error) {
	b, err := bench.ReadFile(path)
	if err != nil {
		return nil, &Failure{Code: ExitFailed, Err: err, Hint: "gatesill help bench-file shows every key; gatesill meters --write FILE asks for what is needed"}
	}
	if err := b.Live(); err != nil {
		return nil, &Failure{Code: ExitFailed, Err: fmt.Errorf("%w %s:%w", bench.ErrBench, path, err), Hint: "gatesill help bench-file shows every key"}
	}
	return b, nil
}

// listPorts lists what is plugged in. It opens nothing.
func listPorts(env *Env) error {
	rows, err := ports()
	if err != nil {
		return &Failure{Code: ExitInstrument, Err: err}
	}
	if env.JSON {
		return report.PortsJSON(env.Out, rows)
	}
	if len(rows) == 0 {
		env.talk("Nothing is plugged in that a meter could hang on: no USB serial adapter, no USB instrument.")
		env.talk("Instruments on the network are not searched for: name them in a bench file as tcp:HOST:PORT.")
		return nil
	}
	if err := report.PortsTable(env.Out, rows, env.style()); err != nil {
		return err
	}
	env.talk("\nWhat is on a line shows only in listening: gatesill meters --write FILE asks which meter it is.")
	return nil
}

func ports() ([]report.PortRow, error) {
	found, err := port.List()
	if err != nil {
		return nil, err
	}
	rows := make([]report.PortRow, len(found))
	for i, f := range found {
		rows[i] = report.PortRow{Line: f.Address, Device: f.Device, Kind: f.Kind, Access: f.Access, Shared: f.Shared}
	}
	return rows, nil
}

// watchMeters listens to a bench and shows what its meters say: live on a
// terminal, as one table or one JSON object a meter otherwise.
func watchMeters(ctx context.Context, env *Env, b *bench.Bench, rq MetersRequest) error {
	start := time.Now()
	watch := newMeterWatch(b, start)
	var keys <-chan rune
	giveBack := func() {}
	if rq.Keyboard != nil && !env.JSON {
		k, restore, err := rq.Keyboard()
		if err != nil {
			return err
		}
		defer func() { giveBack() }()
		keys, giveBack = k, sync.OnceFunc(restore)
	}
	live, long := keys != nil, rq.For
	if long == 0 && !live {
		long = usualListening
	}
	listening, stop := context.WithCancel(ctx)
	defer stop()
	if long > 0 {
		listening, stop = context.WithTimeout(ctx, long)
		defer stop()
	}
	var mu sync.Mutex
	emit := func(e acquire.Event) {
		mu.Lock()
		defer mu.Unlock()
		watch.take(e)
	}
	if !live {
		for _, c := range watch.cautions() {
			env.warn("%s", report.Clean(c))
		}
		if !env.Quiet && !env.JSON {
			env.talk("listening for %v ...", long)
		}
	}
	ended := make(chan error, 1)
	go func() { ended <- acquire.Listen(listening, Sources(b), start, emit) }()
	var err error
	if live {
		err = showMeters(listening, screen.NewLive(rq.Draw, rq.Size, env.Color), keys, func(now float64) screen.Model {
			mu.Lock()
			defer mu.Unlock()
			return watch.picture(now, rq.Rehearsal)
		}, start)
		stop()
		giveBack() // before anything is written line by line
	}
	if lerr := <-ended; lerr != nil && !errors.Is(lerr, context.Canceled) && !errors.Is(lerr, context.DeadlineExceeded) {
		return &Failure{Code: ExitInstrument, Err: lerr}
	}
	if err != nil || ctx.Err() != nil {
		return errors.Join(err, ctx.Err())
	}
	rows := watch.rows(time.Since(start).Seconds())
	if env.JSON {
		err = report.MetersJSON(env.Out, rows)
	} else {
		if err = report.MetersTable(env.Out, rows, env.style()); err == nil && rq.Rehearsal {
			env.talk("\nrehearsal: the bench does not exist, every value is invented")
		}
	}
	return errors.Join(err, silent(rows))
}

// silent is the failure of a bench on which a meter said nothing.
func silent(rows []report.MeterRow) error {
	var said []string
	for _, r := range rows {
		switch {
		case r.Readings > 0:
		case r.Error != "":
			said = append(said, fmt.Sprintf("%s meter%s: %s", r.Role, quoted(r.Name), r.Error))
		default:
			said = append(said, fmt.Sprintf("%s meter%s on %s says nothing", r.Role, quoted(r.Name), r.Line))
		}
	}
	if len(said) == 0 {
		return nil
	}
	hint := "is it on, does its lead sit, does it send (some need a key held at power-up), do speaks and settings fit?"
	if len(said) < len(rows) {
		hint = "the others are heard; " + hint
	}
	return &Failure{Code: ExitInstrument, Err: errors.New(report.Clean(strings.Join(said, "; "))), Hint: hint}
}

// redraw is the time between two pictures.
const redraw = 200 * time.Millisecond

// showMeters draws until a key, or until ctx ends.
func showMeters(ctx context.Context, l *screen.Live, keys <-chan rune, picture func(now float64) screen.Model, start time.Time) error {
	defer l.Close()
	tick := time.NewTicker(redraw)
	defer tick.Stop()
	for {
		if err := l.Show(picture(time.Since(start).Seconds())); err != nil {
			return err
		}
		select {
		case <-ctx.Done():
			return nil
		case <-keys:
			return nil
		case <-tick.C:
		}
	}
}

// writeBench asks for what a bench file needs and writes it.
func writeBench(ctx context.Context, env *Env, path string) error {
	if env.Ask == nil {
		return Usage("gatesill help bench-file shows a bench file to be filled in", "--write asks questions and needs a terminal")
	}
	if st, err := os.Stat(path); err == nil {
		if st.IsDir() {
			return failed("name a file in it", "%s is a folder", path)
		}
		if err := mayOverwrite(env, path); err != nil {
			return err
		}
	}
	if _, err := os.Stat(filepath.Dir(path)); err != nil {
		return failed("", "%w", err)
	}
	rows, err := ports()
	if err != nil {
		return &Failure{Code: ExitInstrument, Err: err}
	}
	var found []bench.Found
	for _, r := range rows {
		found = append(found, bench.Found{Path: r.Line, Text: filepath.Base(r.Device)})
		if r.Access != "" {
			env.warn("%s: %s", report.Clean(r.Line), report.Clean(r.Access))
		}
	}
	text, err := interview(ctx, env, found)
	if err != nil {
		return err
	}
	b, err := bench.Parse([]byte(text))
	if err != nil {
		return failed("", "the bench file that the answers make: %w", err)
	}
	if err := env.WriteFile(path, func(w io.Writer) error { _, err := io.WriteString(w, text); return err }); err != nil {
		return err
	}
	for _, c := range b.Cautions() {
		env.warn("%s", report.Clean(c))
	}
	next := "gatesill meters --bench " + Quote(path) + " shows what the meters say"
	if typed, err := typedBench(b); err == nil && typed {
		next = "gatesill sweep LOT --bench " + Quote(path) + " asks for the readings"
	} else if b.Live() != nil {
		next = "it names no meter yet: gatesill help bench-file shows how one is written"
	}
	env.talk("wrote %s; %s", report.Clean(path), report.Clean(next))
	env.talk("A sweep with --drive needs a [[supply]] besides: gatesill help bench-file shows one.")
	return nil
}

func mayOverwrite(env *Env, path string) error {
	answer := "yes"
	if !env.Yes {
		var err error
		if answer, err = env.Ask(table.Question{Text: path + " is there already. Write over it?", Choices: []string{"yes", "no"}, Flag: "--yes"}); err != nil {
			return err
		}
	}
	if answer != "yes" {
		return failed("name another file", "%s was left as it is", path)
	}
	return nil
}

// interview asks question after question; an answer that cannot be taken is asked
// for again at once.
func interview(ctx context.Context, env *Env, found []bench.Found) (string, error) {
	answers := bench.Answers{}
	for {
		q, more := bench.Next(found, answers)
		if !more {
			return bench.Write(found, answers), nil
		}
		if err := ctx.Err(); err != nil {
			return "", err
		}
		for _, l := range q.Help {
			fmt.Fprintln(env.Err, report.Clean(l))
		}
		for {
			answer, err := env.Ask(table.Question{Text: q.Text, Choices: q.Choices, Default: q.Default, Flag: "a file written by hand (gatesill help bench-file)"})
			if err != nil {
				return "", err
			}
			if answer, err = q.Check(answer); err == nil {
				answers[q.Key] = answer
				break
			}
			fmt.Fprintf(env.Err, "%s.\n", report.Clean(err.Error()))
		}
	}
}
