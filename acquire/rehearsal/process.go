package rehearsal

import (
	"bufio"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"time"
)

// Ready is the first thing the process says.
type Ready struct {
	Lines    map[string]string `json:"lines"`    // role -> stable name of the meter's line
	Supplies map[string]string `json:"supplies"` // what it drives -> stable name of the supply's line
	Logs     map[string]string `json:"logs"`     // what it drives -> log of the supply, one [Heard] a line
	Bench    string            `json:"bench"`    // a bench file that describes exactly this bench
	Error    string            `json:"error,omitempty"`
}

// Status is how the process stands.
type Status struct {
	At    float64               `json:"at_s"` // time of the lines
	CPU   float64               `json:"cpu_s"`
	Lines map[string]LineStatus `json:"lines"` // by name: "line-gate", "supply-gate"
}

// order is one line to the process.
type order struct {
	Order  string  `json:"order"` // insert, remove, knob, fault, truth, status, bye
	Device string  `json:"device,omitempty"`
	Volts  float64 `json:"v,omitempty"`
	Rate   float64 `json:"rate,omitempty"` // V/s; 0 at once
	Fault  *Fault  `json:"fault,omitempty"`
}

// reply is the process's line to every order.
type reply struct {
	Error  string  `json:"error,omitempty"`
	Truth  *Truth  `json:"truth,omitempty"`
	Status *Status `json:"status,omitempty"`
}

// process runs a bench in real time.
type process struct {
	mu     sync.Mutex
	bench  *Bench
	start  time.Time
	folder string
	own    bool // the folder was made here
	closed bool // the lines are gone for good
	ends   map[string]*endpoint
	back   map[string]float64 // when an unplugged line comes back, s
	wake   chan struct{}
	batch  float64 // s, shortest sleep
	trying sync.WaitGroup
}

// Main is the process of a rehearsal: it reads a [Config] and then orders from stdin,
// one JSON value a line, writes [Ready] and then a reply to every order to stdout,
// and ends when it is told to or when stdin ends. It returns the exit code.
func Main(stdin io.Reader, stdout io.Writer) int {
	in := json.NewDecoder(bufio.NewReader(stdin))
	out := json.NewEncoder(stdout)
	var c Config
	if err := in.Decode(&c); err != nil {
		out.Encode(Ready{Error: fmt.Sprintf("%v: configuration: %v", ErrConfig, err)})
		return 1
	}
	p, err := newProcess(c)
	if err != nil {
		out.Encode(Ready{Error: err.Error()})
		return 1
	}
	defer p.close()
	stop := make(chan struct{})
	p.trying.Add(1)
	go p.run(stop)
	defer close(stop)
	ready, err := p.ready()
	if err != nil {
		out.Encode(Ready{Error: err.Error()})
		return 1
	}
	if out.Encode(ready) != nil {
		return 1
	}
	for {
		var o order
		if err := in.Decode(&o); errors.Is(err, io.EOF) || o.Order == "bye" {
			p.outlast(lastWords)
			return 0
		} else if err != nil {
			out.Encode(reply{Error: fmt.Sprintf("%v: order: %v", ErrConfig, err)})
			return 1
		}
		if out.Encode(p.obey(o)) != nil {
			return 1
		}
	}
}

// lastWords is how long the supplies stay for whoever still has their lines open.
const lastWords = 10 * time.Second

// outlast keeps the supplies until nobody has their lines open any more: when the
// measuring program dies, whoever guards the supplies must still reach them.
func (p *process) outlast(limit time.Duration) {
	held := func() bool {
		p.mu.Lock()
		defer p.mu.Unlock()
		for _, i := range p.bench.list {
			if e := p.ends[i.line]; i.supply != nil && e.tty != nil && e.tty.open() {
				return true
			}
		}
		return false
	}
	for begun := time.Now(); held() && time.Since(begun) < limit; {
		time.Sleep(20 * time.Millisecond)
	}
}

func newProcess(c Config) (p *process, err error) {
	p = &process{ends: map[string]*endpoint{}, back: map[string]float64{}, wake: make(chan struct{}, 1), folder: c.Folder}
	if p.bench, err = NewBench(c); err != nil {
		return nil, err
	}
	if p.folder == "" {
		if p.folder, err = os.MkdirTemp("", "rehearsal-"); err != nil {
			return nil, err
		}
		p.own = true
	} else if p.folder, err = filepath.Abs(p.folder); err != nil {
		return nil, err
	} else if err = os.MkdirAll(p.folder, 0o755); err != nil {
		return nil, err
	}
	defer func() {
		if err != nil {
			p.remove()
		}
	}()
	p.start = time.Now()
	for _, drives := range c.Supplies {
		f, err := os.OpenFile(p.logName(drives), os.O_CREATE|os.O_WRONLY|os.O_TRUNC, 0o644)
		if err != nil {
			return nil, err
		}
		p.bench.Log(drives, f, func(at float64) int64 { return p.start.Add(seconds(at)).UnixNano() })
	}
	// Fast lines are served in batches: a reader sees them at most that much later.
	for _, m := range c.Meters {
		if _, cycle := m.conversion(); cycle < 0.005 {
			p.batch = 0.002
		}
	}
	for _, name := range p.bench.Lines() {
		e := &endpoint{link: filepath.Join(p.folder, name)}
		p.ends[name] = e
		if err := p.plug(name); err != nil {
			return nil, err
		}
	}
	return p, nil
}

func (p *process) logName(drives string) string {
	return filepath.Join(p.folder, "supply-"+drives+".log")
}

func seconds(s float64) time.Duration { return time.Duration(s * float64(time.Second)) }

func (p *process) now() float64 { return time.Since(p.start).Seconds() }

// plug plugs a line in and listens on it.
func (p *process) plug(name string) error {
	e := p.ends[name]
	if err := e.plug(); err != nil {
		return err
	}
	t := e.tty
	p.trying.Add(1)
	go func() {
		defer p.trying.Done()
		e.listen(t, func(b []byte) {
			p.mu.Lock()
			if e.tty == t {
				p.step()
				p.bench.Hear(name, b)
			}
			p.mu.Unlock()
			p.rouse()
		})
	}()
	return nil
}

func (p *process) rouse() {
	select {
	case p.wake <- struct{}{}:
	default:
	}
}

// step brings the simulation to the present and sends what is due; it gives when it
// wants to be called next, s.
func (p *process) step() float64 {
	if p.closed {
		return math.Inf(1)
	}
	now := p.now()
	for _, s := range p.bench.Step(now) {
		p.ends[s.Line].take(s)
	}
	next := p.bench.Next()
	for name, e := range p.ends {
		if t, more := e.wire(now); more {
			next = min(next, t)
		}
		if t, away := p.back[name]; away && e.tty == nil {
			if now >= t && p.plug(name) == nil {
				delete(p.back, name)
			} else {
				next = min(next, max(t, now+0.05))
			}
		}
	}
	return next
}

// run keeps time until stop.
func (p *process) run(stop chan struct{}) {
	defer p.trying.Done()
	timer := time.NewTimer(0)
	defer timer.Stop()
	for {
		p.mu.Lock()
		next := p.step()
		p.mu.Unlock()
		wait := time.Hour
		if !math.IsInf(next, 1) {
			wait = max(seconds(p.batch), min(wait, seconds(next-p.now())))
		}
		timer.Reset(wait)
		select {
		case <-stop:
			return
		case <-p.wake:
		case <-timer.C:
		}
	}
}

// obey follows an order.
func (p *process) obey(o order) reply {
	p.mu.Lock()
	defer p.mu.Unlock()
	defer p.rouse()
	p.step()
	var err error
	switch o.Order {
	case "insert":
		err = p.bench.Insert(o.Device)
	case "remove":
		p.bench.Remove()
	case "knob":
		err = p.bench.Knob(o.Volts, o.Rate)
	case "truth":
		t := p.bench.Truth()
		return reply{Truth: &t}
	case "status":
		s := p.status()
		return reply{Status: &s}
	case "fault":
		if o.Fault == nil {
			err = fmt.Errorf("%w: order fault without a fault", ErrConfig)
			break
		}
		if err = p.bench.Fault(*o.Fault); err == nil {
			p.adapters()
		}
	default:
		err = fmt.Errorf("%w: no order %q", ErrConfig, o.Order)
	}
	if err != nil {
		return reply{Error: err.Error()}
	}
	return reply{}
}

// adapters pulls and plugs as the faults say.
func (p *process) adapters() {
	for name, e := range p.ends {
		until, away := p.bench.unplug[name]
		switch {
		case away && until > p.bench.now && e.tty != nil:
			e.pull()
			p.back[name] = until
		case away && e.tty == nil:
			p.back[name] = until
		case !away && e.tty == nil:
			p.back[name] = 0
		}
	}
}

func (p *process) status() Status {
	s := Status{At: p.bench.now, CPU: cpuSeconds(), Lines: map[string]LineStatus{}}
	for name, e := range p.ends {
		l := e.status
		l.Open = e.tty != nil && e.tty.open()
		l.Unsaid = p.bench.at(name).unsaid
		s.Lines[name] = l
	}
	return s
}

func (p *process) ready() (Ready, error) {
	r := Ready{Lines: map[string]string{}, Supplies: map[string]string{}, Logs: map[string]string{}}
	for _, i := range p.bench.list {
		for _, c := range i.channels {
			r.Lines[c.Role] = p.ends[i.line].link
		}
		if i.supply != nil {
			r.Supplies[i.supply.drives] = p.ends[i.line].link
			r.Logs[i.supply.drives] = p.logName(i.supply.drives)
		}
	}
	var err error
	r.Bench, err = p.bench.Describe(func(line string) string { return p.ends[line].link })
	return r, err
}

// close takes the lines away and waits until nothing listens on them any more.
func (p *process) close() {
	p.mu.Lock()
	p.closed = true
	p.remove()
	p.mu.Unlock()
	p.trying.Wait()
}

func (p *process) remove() {
	for _, e := range p.ends {
		e.remove()
	}
	for _, i := range p.bench.list {
		if i.supply != nil {
			if f, ok := i.supply.log.(io.Closer); ok {
				f.Close()
			}
		}
	}
	if p.own && strings.HasPrefix(filepath.Base(p.folder), "rehearsal-") {
		os.RemoveAll(p.folder)
	}
}
