package rehearsal

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"strings"
	"sync"
	"time"
)

// Rehearsal is a running process of a rehearsal, as its parent sees it. Its methods
// may be called from several goroutines.
type Rehearsal struct {
	ready  Ready
	cmd    *exec.Cmd
	mu     sync.Mutex
	in     io.WriteCloser
	out    *json.Decoder
	stderr tail
	once   sync.Once
	ended  error
}

// tail keeps the last of what a process complains.
type tail struct {
	mu sync.Mutex
	b  []byte
}

func (t *tail) Write(p []byte) (int, error) {
	const keep = 2000
	t.mu.Lock()
	defer t.mu.Unlock()
	t.b = append(t.b, p...)
	if len(t.b) > keep {
		t.b = append([]byte(nil), t.b[len(t.b)-keep:]...)
	}
	return len(p), nil
}

func (t *tail) text() string {
	t.mu.Lock()
	defer t.mu.Unlock()
	return string(bytes.TrimSpace(t.b))
}

// Start starts exe with args, which must end up in [Main], and gives it the
// configuration. env is added to the environment. The process ends with ctx, with
// Close, or with this process, whose end it hears by its stdin.
func Start(ctx context.Context, exe string, args, env []string, c Config) (*Rehearsal, error) {
	if err := terminals(); err != nil {
		return nil, err
	}
	if err := c.check(); err != nil {
		return nil, err
	}
	r := &Rehearsal{}
	r.cmd = exec.CommandContext(ctx, exe, args...)
	r.cmd.Env = append(os.Environ(), env...)
	r.cmd.SysProcAttr = apart()
	r.cmd.Stderr = &r.stderr
	in, err := r.cmd.StdinPipe()
	if err != nil {
		return nil, err
	}
	out, err := r.cmd.StdoutPipe()
	if err != nil {
		return nil, err
	}
	r.in, r.out = in, json.NewDecoder(out)
	r.cmd.Cancel = in.Close // it ends by itself then
	r.cmd.WaitDelay = 3 * time.Second
	if err := r.cmd.Start(); err != nil {
		return nil, fmt.Errorf("process of the rehearsal: %w", err)
	}
	err = json.NewEncoder(r.in).Encode(c)
	if err == nil {
		err = r.out.Decode(&r.ready)
	}
	if err == nil && r.ready.Error != "" {
		r.Close()
		return nil, fmt.Errorf("%w: %s", ErrConfig, strings.TrimPrefix(r.ready.Error, ErrConfig.Error()+": "))
	}
	if err != nil {
		err = r.gone(err)
		r.Close()
		return nil, err
	}
	return r, nil
}

// gone is an error of the process that says nothing any more.
func (r *Rehearsal) gone(err error) error {
	if text := r.stderr.text(); text != "" {
		return fmt.Errorf("process of the rehearsal: %w: %s", err, text)
	}
	return fmt.Errorf("process of the rehearsal: %w", err)
}

// order sends an order and waits for its reply.
func (r *Rehearsal) order(o order) (reply, error) {
	r.mu.Lock()
	defer r.mu.Unlock()
	var p reply
	if err := json.NewEncoder(r.in).Encode(o); err != nil {
		return p, r.gone(err)
	}
	if err := r.out.Decode(&p); err != nil {
		return p, r.gone(err)
	}
	if p.Error != "" {
		return p, fmt.Errorf("%w: %s", ErrConfig, strings.TrimPrefix(p.Error, ErrConfig.Error()+": "))
	}
	return p, nil
}

func (r *Rehearsal) plainOrder(o order) error {
	_, err := r.order(o)
	return err
}

// Insert puts a device, cold, into the fixture.
func (r *Rehearsal) Insert(device string) error {
	return r.plainOrder(order{Order: "insert", Device: device})
}

// Remove takes the device out.
func (r *Rehearsal) Remove() error { return r.plainOrder(order{Order: "remove"}) }

// Knob turns the gate knob to v [V] at rate [V/s], 0 at once; it does not wait until
// the knob is there.
func (r *Rehearsal) Knob(v, rate float64) error {
	return r.plainOrder(order{Order: "knob", Volts: v, Rate: rate})
}

// Fault lets something go wrong.
func (r *Rehearsal) Fault(f Fault) error { return r.plainOrder(order{Order: "fault", Fault: &f}) }

// Truth is what is so now, whatever the meters say.
func (r *Rehearsal) Truth() (Truth, error) {
	p, err := r.order(order{Order: "truth"})
	if err != nil {
		return Truth{}, err
	}
	if p.Truth == nil {
		return Truth{}, r.gone(errors.New("no truth in its reply"))
	}
	return *p.Truth, nil
}

// Status is how the process and its lines stand.
func (r *Rehearsal) Status() (Status, error) {
	p, err := r.order(order{Order: "status"})
	if err != nil {
		return Status{}, err
	}
	if p.Status == nil {
		return Status{}, r.gone(errors.New("no status in its reply"))
	}
	return *p.Status, nil
}

// Bench is the text of a bench file that describes the bench.
func (r *Rehearsal) Bench() string { return r.ready.Bench }

// Lines are the addresses of the meters' lines by role.
func (r *Rehearsal) Lines() map[string]string { return r.ready.Lines }

// Supplies are the addresses of the supplies' lines by what they drive.
func (r *Rehearsal) Supplies() map[string]string { return r.ready.Supplies }

// Log reads what the supply that drives gate or drain has heard so far.
func (r *Rehearsal) Log(drives string) ([]Heard, error) {
	b, err := os.ReadFile(r.ready.Logs[drives])
	if err != nil {
		return nil, fmt.Errorf("log of the %s supply: %w", drives, err)
	}
	var out []Heard
	for i, line := range bytes.Split(bytes.TrimSpace(b), []byte("\n")) {
		if len(line) == 0 {
			continue
		}
		var h Heard
		if err := json.Unmarshal(line, &h); err != nil {
			return out, fmt.Errorf("log of the %s supply, line %d: %w", drives, i+1, err)
		}
		out = append(out, h)
	}
	return out, nil
}

// Close ends the process and waits for it. It may be called again.
func (r *Rehearsal) Close() error {
	r.once.Do(func() {
		r.in.Close()
		if err := r.cmd.Wait(); err != nil {
			r.ended = r.gone(err)
		}
	})
	return r.ended
}
