package keeper

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"os/exec"
	"sync"
	"time"
)

const (
	startLimit  = 30 * time.Second       // several slow supplies, each asked some twenty times
	answerLimit = 25 * time.Second       // longer than the keeper's own limits of any order
	pipeLimit   = 100 * time.Millisecond // of a write to the keeper
)

// Keeper is the measuring program's side of a keeper process. Its methods may be
// called from several goroutines; [Keeper.Beat] belongs into the measuring loop and
// nowhere else, as it is what proves that the loop still runs.
type Keeper struct {
	cmd  *exec.Cmd
	in   *os.File // orders
	done chan OffReport
	gone chan struct{} // closed when the process does not talk any more

	mu      sync.Mutex
	nextID  int
	waiting map[int]chan answer
	off     *OffReport
	ended   error

	writing sync.Mutex
}

// Start starts the keeper process, exe with args and with env added to this program's
// environment, and waits until both supplies are at known set-points: gate output on
// at the off voltage, drain supply off. When ctx ends, the keeper goes to the off
// state. A keeper is never killed.
func Start(ctx context.Context, exe string, args, env []string, c Config) (*Keeper, error) {
	if err := c.Check(); err != nil {
		return nil, err
	}
	first, err := json.Marshal(c)
	if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrConfig, err)
	}
	if err := ctx.Err(); err != nil {
		return nil, fmt.Errorf("%w: %w", ErrConfig, err)
	}
	k := &Keeper{
		cmd: exec.Command(exe, args...), done: make(chan OffReport, 1), gone: make(chan struct{}),
		waiting: map[int]chan answer{},
	}
	k.cmd.Env = append(os.Environ(), env...)
	k.cmd.Stderr = os.Stderr // a fault of the keeper's would be told there
	apart(k.cmd)
	theirs, in, err := os.Pipe()
	if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrConfig, err)
	}
	out, answers, err := os.Pipe()
	if err != nil {
		theirs.Close()
		in.Close()
		return nil, fmt.Errorf("%w: %w", ErrConfig, err)
	}
	k.in, k.cmd.Stdin, k.cmd.Stdout = in, theirs, answers
	err = k.cmd.Start()
	theirs.Close()
	answers.Close()
	if err != nil {
		in.Close()
		out.Close()
		return nil, fmt.Errorf("%w: %w", ErrConfig, err)
	}
	started := k.expect(0)
	go k.listen(out)
	if err := k.write(first); err != nil {
		in.Close()
		return nil, fmt.Errorf("%w: %w", ErrConfig, err)
	}
	limit := time.NewTimer(startLimit)
	defer limit.Stop()
	select {
	case a := <-started:
		err = a.startErr()
	case <-ctx.Done():
		err = fmt.Errorf("%w: %w", ErrConfig, ctx.Err())
	case <-k.gone:
		err = k.why()
	case <-limit.C:
		err = fmt.Errorf("%w: no answer in %v", ErrGone, startLimit)
	}
	if err != nil {
		in.Close() // what was switched on is switched off
		return nil, err
	}
	go func() {
		select {
		case <-ctx.Done():
			k.write(encode(order{Do: doOff, ID: unasked, Reason: "stopped: " + context.Cause(ctx).Error()}))
		case <-k.gone:
		}
	}()
	return k, nil
}

func encode(o order) []byte {
	b, err := json.Marshal(o)
	if err != nil {
		panic(err) // only of numbers that are none, which the callers refuse
	}
	return b
}

// write sends one line. A line cut short is a malformed order, for which the keeper
// goes to the off state.
func (k *Keeper) write(line []byte) error {
	k.writing.Lock()
	defer k.writing.Unlock()
	k.in.SetWriteDeadline(time.Now().Add(pipeLimit)) // where pipes have no deadlines, a write waits
	_, err := k.in.Write(append(line, '\n'))
	if err != nil {
		return fmt.Errorf("%w: %w", ErrGone, err)
	}
	return nil
}

func (k *Keeper) expect(id int) chan answer {
	c := make(chan answer, 1)
	k.mu.Lock()
	k.waiting[id] = c
	k.mu.Unlock()
	return c
}

func (k *Keeper) listen(out *os.File) {
	in := bufio.NewScanner(out)
	in.Buffer(make([]byte, 4096), longestLine)
	var bad error
	for in.Scan() {
		var a answer
		if err := json.Unmarshal(in.Bytes(), &a); err != nil {
			bad = fmt.Errorf("%w: its answer %.80q is not understood", ErrGone, in.Bytes())
			break
		}
		k.take(a)
	}
	out.Close()
	if bad != nil {
		k.in.Close() // the off state, as nobody knows what it does
	}
	err := k.cmd.Wait()
	k.mu.Lock()
	k.ended = bad
	if bad == nil {
		k.ended = fmt.Errorf("%w: it ended (%v)", ErrGone, k.cmd.ProcessState)
		if err == nil && k.off != nil {
			k.ended = ErrOff
		}
	}
	if k.off == nil {
		k.off = &OffReport{
			Reason: k.ended.Error(), Drain: "not known", Gate: math.NaN(),
			Errors: []string{"the keeper ended without a report; switch the supplies off by hand"},
		}
		k.done <- *k.off
	}
	k.mu.Unlock()
	close(k.done)
	close(k.gone)
}

func (k *Keeper) take(a answer) {
	k.mu.Lock()
	defer k.mu.Unlock()
	if a.Off != nil {
		if k.off == nil && a.ID != 0 {
			_, asked := k.waiting[a.ID]
			if !asked {
				k.done <- *a.Off
			}
		}
		k.off = a.Off
	}
	if c, ok := k.waiting[a.ID]; ok {
		delete(k.waiting, a.ID)
		c <- a
	}
}

func (k *Keeper) why() error {
	k.mu.Lock()
	defer k.mu.Unlock()
	if k.ended == nil {
		return ErrGone
	}
	return k.ended
}

// ask sends an order and waits for its answer.
func (k *Keeper) ask(o order) (answer, error) {
	k.mu.Lock()
	k.nextID++
	o.ID = k.nextID
	c := make(chan answer, 1)
	k.waiting[o.ID] = c
	k.mu.Unlock()
	if err := k.write(encode(o)); err != nil {
		select {
		case <-k.gone: // why it is gone says more than a broken pipe
		case <-time.After(pipeLimit):
			return answer{}, err
		}
	}
	limit := time.NewTimer(answerLimit)
	defer limit.Stop()
	select {
	case a := <-c:
		return a, nil
	case <-k.gone:
		select {
		case a := <-c:
			return a, nil
		default:
			return answer{}, k.why()
		}
	case <-limit.C:
		return answer{}, fmt.Errorf("%w: no answer to %q in %v", ErrGone, o.Do, answerLimit)
	}
}

// Set brings the gate to v volts and gives what the supply then measures at its output,
// NaN when that was not read.
func (k *Keeper) Set(v float64) (float64, error) {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return math.NaN(), fmt.Errorf("%w: %v V is no voltage", ErrTooHigh, v)
	}
	a, err := k.ask(order{Do: doGate, V: v})
	if err == nil {
		err = a.err()
	}
	if a.V == nil {
		return math.NaN(), err
	}
	return *a.V, err
}

// Drain switches the drain supply, on only with the gate at its off voltage.
func (k *Keeper) Drain(on bool) error {
	a, err := k.ask(order{Do: doDrain, On: on})
	if err == nil {
		err = a.err()
	}
	return err
}

// Beat tells the keeper that the measuring loop runs. It does not wait for anything.
func (k *Keeper) Beat() error { return k.write([]byte(`{"do":"beat"}`)) }

// Off brings the device to its off state. currentGone says that the measuring program
// has seen the drain current go; called once more with it, Off opens a gate that was
// held.
func (k *Keeper) Off(reason string, currentGone bool) (OffReport, error) {
	return k.leave(order{Do: doOff, Reason: reason, Gone: currentGone})
}

func (k *Keeper) leave(o order) (OffReport, error) {
	a, err := k.ask(o)
	if err != nil || a.Off == nil {
		k.mu.Lock()
		defer k.mu.Unlock()
		if k.off != nil {
			return *k.off, nil // it was there already and has ended since
		}
		return OffReport{Reason: o.Reason, Drain: "not known", Gate: math.NaN()}, errors.Join(ErrGone, err)
	}
	return *a.Off, nil
}

// Status is how things are.
type Status struct {
	Gate    float64    // V, read back last; NaN: not read
	DrainOn bool       // the drain supply is on, or may be
	Off     *OffReport // not nil: in the off state
}

// Status asks the keeper how things are. It is no heartbeat.
func (k *Keeper) Status() (Status, error) {
	a, err := k.ask(order{Do: doStatus})
	s := Status{Gate: math.NaN(), DrainOn: a.Drain, Off: a.Off}
	if a.V != nil {
		s.Gate = *a.V
	}
	if err == nil {
		err = a.err()
	}
	return s, err
}

// Done gives one report when the keeper went to the off state without [Keeper.Off] or
// [Keeper.Close]: a missed heartbeat, an end of the context, a failing line. It is
// closed when the process has ended.
func (k *Keeper) Done() <-chan OffReport { return k.done }

// Close brings the device to its off state and ends the process. It fails when the
// off state was not reached.
func (k *Keeper) Close() error {
	r, err := k.leave(order{Do: doBye, Reason: "end of work"})
	k.in.Close()
	select {
	case <-k.gone:
	case <-time.After(answerLimit):
		err = errors.Join(err, fmt.Errorf("%w: it does not end", ErrGone))
	}
	if err == nil && !r.Reached {
		err = fmt.Errorf("keeper: the off state was not proved (%s): drain supply %s; gate %.4g V: %v", r.Reason, r.Drain, r.Gate, r.Errors)
	}
	return err
}
