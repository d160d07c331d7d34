package keeper

import (
	"bytes"
	"fmt"
	"strconv"
	"strings"
	"sync"
	"time"

	"gatesill/acquire/port"
)

// notes is what several supplies saw, in the order they saw it.
type notes struct {
	mu   sync.Mutex
	seen []note
}

type note struct {
	who, text string
	at        time.Time
}

func (n *notes) add(who, text string) {
	n.mu.Lock()
	n.seen = append(n.seen, note{who, text, time.Now()})
	n.mu.Unlock()
}

func (n *notes) all() []note {
	n.mu.Lock()
	defer n.mu.Unlock()
	return append([]note(nil), n.seen...)
}

// first gives the place of the first command at or after from, -1: none.
func (n *notes) first(who, text string, from int) int {
	for i, s := range n.all() {
		if i >= from && s.who == who && s.text == text {
			return i
		}
	}
	return -1
}

func (n *notes) String() string {
	var b strings.Builder
	for _, s := range n.all() {
		fmt.Fprintf(&b, "%s %s: %s\n", s.at.Format("05.000"), s.who, s.text)
	}
	return b.String()
}

// supply is a model of a power supply with one or more outputs that speaks the few
// SCPI commands needed here. It is our own, and proves only that the keeper keeps its
// own rules.
type supply struct {
	name  string
	notes *notes

	mu       sync.Mutex
	chosen   int
	outputs  map[int]*output
	queue    []string
	mute     bool          // answers nothing
	slow     time.Duration // before each answer
	unknown  bool          // is no supply that answers *IDN?
	greatest float64       // V that it can give; 0: 30
	drops    bool          // drops what stands behind a command that it refuses
}

type output struct {
	volts, amps float64
	on          bool
	highest     float64 // magnitude that ever came out
	refuseOff   bool    // OUTP OFF raises an error
	refuseSet   bool    // VOLT raises an error
	add         float64 // V by which what comes out is wrong
}

func newSupply(name string, n *notes, outputs int) *supply {
	s := &supply{name: name, notes: n, chosen: 1, outputs: map[int]*output{}}
	for i := range outputs {
		s.outputs[i+1] = &output{}
	}
	return s
}

func (s *supply) with(f func(o *output)) { s.withOutput(1, f) }

func (s *supply) withOutput(i int, f func(o *output)) {
	s.mu.Lock()
	defer s.mu.Unlock()
	f(s.outputs[i])
	s.level(s.outputs[i])
}

func (s *supply) level(o *output) float64 {
	if !o.on {
		return 0
	}
	v := o.volts + o.add
	if v < 0 {
		o.highest = max(o.highest, -v)
	}
	o.highest = max(o.highest, v)
	return v
}

// line does one message and gives its answer, "" for none.
func (s *supply) line(message string) string {
	s.mu.Lock()
	defer s.mu.Unlock()
	var answers []string
	for _, text := range strings.Split(message, ";") {
		text = strings.TrimPrefix(strings.TrimSpace(text), ":")
		if text == "" {
			continue
		}
		s.notes.add(s.name, text)
		faults := len(s.queue)
		a := s.command(text)
		if s.drops && len(s.queue) > faults {
			break
		}
		if a != "" {
			answers = append(answers, a)
		}
	}
	if s.mute {
		return ""
	}
	return strings.Join(answers, ";")
}

func (s *supply) fault(code int, text string) string {
	s.queue = append(s.queue, fmt.Sprintf(`%d,"%s"`, code, text))
	return ""
}

func (s *supply) command(text string) string {
	o := s.outputs[s.chosen]
	head, arg, _ := strings.Cut(text, " ")
	v, err := strconv.ParseFloat(arg, 64)
	switch head {
	case "*IDN?":
		if s.unknown {
			return ""
		}
		return "maker,model " + s.name + ",0,0"
	case "*CLS":
		s.queue = nil
	case "*OPC?":
		return "1"
	case "SYST:ERR?":
		if len(s.queue) == 0 {
			return `0,"No error"`
		}
		first := s.queue[0]
		s.queue = s.queue[1:]
		return first
	case "INST:NSEL":
		if s.outputs[int(v)] == nil || err != nil {
			return s.fault(-222, "no such output")
		}
		s.chosen = int(v)
	case "VOLT":
		greatest := 30.0
		if s.greatest != 0 {
			greatest = s.greatest
		}
		if err != nil || v > greatest || v < -greatest || o.refuseSet {
			return s.fault(-222, "out of range")
		}
		o.volts = v
		s.level(o)
	case "CURR":
		o.amps = v
	case "VOLT?":
		return strconv.FormatFloat(o.volts, 'E', 5, 64)
	case "CURR?":
		return strconv.FormatFloat(o.amps, 'E', 5, 64)
	case "OUTP":
		if arg == "OFF" && o.refuseOff {
			return s.fault(-203, "command protected")
		}
		o.on = arg == "ON"
		s.level(o)
	case "OUTP?":
		if o.on {
			return "1"
		}
		return "0"
	case "MEAS:VOLT?":
		return strconv.FormatFloat(s.level(o), 'E', 5, 64)
	default:
		return s.fault(-113, "undefined header")
	}
	return ""
}

// wire is a line in memory to one supply.
type wire struct {
	s *supply

	mu      sync.Mutex
	broken  error         // every call gives it
	blocked chan struct{} // not nil: a write waits until it is closed, or this wire is
	closed  chan struct{}
	once    sync.Once
	got     []byte
	answers bytes.Buffer
	due     time.Time
}

func newWire(s *supply) *wire { return &wire{s: s, closed: make(chan struct{})} }

func (w *wire) set(f func(*wire)) {
	w.mu.Lock()
	f(w)
	w.mu.Unlock()
}

func (w *wire) Read(p []byte) (int, error) {
	for end := time.Now().Add(20 * time.Millisecond); time.Now().Before(end); time.Sleep(time.Millisecond) {
		select {
		case <-w.closed:
			return 0, port.ErrClosed
		default:
		}
		w.mu.Lock()
		if w.broken != nil {
			defer w.mu.Unlock()
			return 0, w.broken
		}
		if w.answers.Len() > 0 && !time.Now().Before(w.due) {
			defer w.mu.Unlock()
			return w.answers.Read(p)
		}
		w.mu.Unlock()
	}
	return 0, nil
}

func (w *wire) Write(p []byte) (int, error) {
	w.mu.Lock()
	blocked, broken := w.blocked, w.broken
	w.mu.Unlock()
	if broken != nil {
		return 0, broken
	}
	if blocked != nil {
		select {
		case <-blocked:
		case <-w.closed:
			return 0, port.ErrClosed
		}
	}
	select {
	case <-w.closed:
		return 0, port.ErrClosed
	default:
	}
	w.mu.Lock()
	defer w.mu.Unlock()
	w.got = append(w.got, p...)
	for {
		i := bytes.IndexByte(w.got, '\n')
		if i < 0 {
			return len(p), nil
		}
		if a := w.s.line(string(w.got[:i])); a != "" {
			w.answers.WriteString(a + "\n")
			w.due = time.Now().Add(w.s.slow)
		}
		w.got = w.got[i+1:]
	}
}

func (w *wire) Discard() error {
	w.mu.Lock()
	defer w.mu.Unlock()
	if !time.Now().Before(w.due) { // what is under way still comes
		w.answers.Reset()
	}
	return w.broken
}
func (w *wire) DiscardOutput() error    { return nil }
func (w *wire) Close() error            { w.once.Do(func() { close(w.closed) }); return nil }
func (w *wire) ByteTime() time.Duration { return 0 }
func (w *wire) Address() string         { return w.s.name }
