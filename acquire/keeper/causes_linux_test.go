package keeper

import (
	"bufio"
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"
)

const (
	silentLimit = 1000 * time.Millisecond
	beatLimit   = 500 * time.Millisecond
)

// scene is a measuring program at work, with its keeper, two supplies and a meter.
type scene struct {
	t           *testing.T
	gate, drain *instrument
	meter       *os.File
	cmd         *exec.Cmd
	keeper      int // its process
	log         string

	mu   sync.Mutex
	said bytes.Buffer
	last time.Time // of the last frame
	stop bool
}

func newScene(t *testing.T, wait time.Duration) *scene {
	t.Helper()
	gate, drain := pair()
	s := &scene{t: t, gate: onLine(t, gate), drain: onLine(t, drain), log: filepath.Join(t.TempDir(), "log")}
	var meterName string
	s.meter, meterName = openPair(t)
	t.Cleanup(func() { s.meter.Close() })
	c := gateAndDrain()
	c.Gate.Address, c.Drain.Address, c.BeatLimit, c.Log = s.gate.name, s.drain.name, beatLimit, s.log
	b, err := json.Marshal(work{Config: c, Meter: meterName, Gate: 3, Most: 1, Silent: silentLimit})
	if err != nil {
		t.Fatal(err)
	}
	s.cmd = exec.Command(os.Args[0])
	s.cmd.Env = append(os.Environ(), role+"=measure", assignment+"="+string(b))
	s.cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true} // an interrupt to its group must not reach the test
	out, err := s.cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	errs, err := os.Create(filepath.Join(t.TempDir(), "stderr"))
	if err != nil {
		t.Fatal(err)
	}
	defer errs.Close()
	s.cmd.Stderr = errs
	if err := s.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	ready := make(chan bool, 1)
	go func() {
		for in := bufio.NewScanner(out); in.Scan(); {
			s.mu.Lock()
			fmt.Fprintln(&s.said, in.Text())
			s.mu.Unlock()
			if n, _ := fmt.Sscanf(in.Text(), "keeper %d", &s.keeper); n == 1 {
				ready <- true
			}
		}
		close(ready)
	}()
	select {
	case ok := <-ready:
		if !ok {
			t.Fatalf("the measuring program did not start: %s\n%s", s.said.String(), gate.notes)
		}
	case <-time.After(generous):
		t.Fatal("the measuring program does not start")
	}
	go func() {
		for range time.Tick(50 * time.Millisecond) {
			if !s.frame("0.1") {
				return
			}
		}
	}()
	time.Sleep(wait)
	return s
}

// frame sends a reading, unless the meter is silent.
func (s *scene) frame(text string) bool {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.stop {
		return false
	}
	s.last = time.Now()
	s.meter.WriteString(text + "\n")
	return true
}

func (s *scene) silence() {
	s.mu.Lock()
	s.stop = true
	s.mu.Unlock()
}

func (s *scene) lastFrame() time.Time {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.last
}

// whenOff waits for the off state and gives when the later one of its two commands
// arrived.
func (s *scene) whenOff(from int) time.Time {
	s.t.Helper()
	n := s.gate.notes
	for end := time.Now().Add(generous); ; time.Sleep(2 * time.Millisecond) {
		d, g := n.first("drain", "OUTP OFF", from), n.first("gate", "VOLT 0", from)
		if d >= 0 && g >= 0 {
			if d > g {
				s.t.Errorf("the gate went first\n%s", n)
			}
			return n.all()[max(d, g)].at
		}
		if time.Now().After(end) {
			s.t.Fatalf("no off state\n%s\n%s", n, s.said.String())
		}
	}
}

// ended waits for both processes and looks at what they left.
func (s *scene) ended() {
	s.t.Helper()
	s.cmd.Wait() // killed or not, it ends
	for end := time.Now().Add(generous); alive(s.keeper); time.Sleep(5 * time.Millisecond) {
		if time.Now().After(end) {
			s.t.Fatalf("the keeper does not end\n%s", s.gate.notes)
		}
	}
	if g, d := s.gate.state(), s.drain.state(); !g.on || g.volts != 0 || d.on {
		s.t.Errorf("left behind: gate %+v, drain %+v", g, d)
	}
	log, err := os.ReadFile(s.log)
	if err != nil || !strings.Contains(string(log), "off state: ") || !strings.Contains(string(log), "Reached:true") {
		s.t.Errorf("the log does not tell of the off state: %v\n%s", err, log)
	}
}

// alive tells whether a process runs; one that nobody has fetched yet does not.
func alive(pid int) bool {
	b, err := os.ReadFile(fmt.Sprintf("/proc/%d/stat", pid))
	_, state, _ := strings.Cut(string(b), ") ")
	return err == nil && !strings.HasPrefix(state, "Z")
}

// causes are what ends the work, each with the time that it is allowed beside the
// limit it sets off.
var causes = []struct {
	name  string
	limit time.Duration
	goal  time.Duration // of the median, beyond the limit
	do    func(s *scene) time.Time
}{
	{"limit", 0, 20 * time.Millisecond, func(s *scene) time.Time { s.frame("2.5"); return s.lastFrame() }},
	// The supply is busy with an order and needs 30 ms for each answer.
	{"limit, busy", 0, 60 * time.Millisecond, func(s *scene) time.Time {
		s.gate.mu.Lock()
		s.gate.slow = 30 * time.Millisecond
		s.gate.mu.Unlock()
		s.frame("busy")
		time.Sleep(200 * time.Millisecond)
		s.frame("2.5")
		return s.lastFrame()
	}},
	{"SIGINT", 0, 20 * time.Millisecond, func(s *scene) time.Time { return s.signal(syscall.SIGINT) }},
	{"SIGTERM", 0, 20 * time.Millisecond, func(s *scene) time.Time { return s.signal(syscall.SIGTERM) }},
	{"SIGKILL", 0, 20 * time.Millisecond, func(s *scene) time.Time { return s.signal(syscall.SIGKILL) }},
	{"panic", 0, 20 * time.Millisecond, func(s *scene) time.Time { s.frame("panic"); return s.lastFrame() }},
	{"meter unplugged", 0, 20 * time.Millisecond, func(s *scene) time.Time {
		s.silence()
		at := time.Now()
		s.meter.Close()
		return at
	}},
	{"meter silent", silentLimit, 100 * time.Millisecond, func(s *scene) time.Time { s.silence(); return s.lastFrame() }},
	{"hung", beatLimit, 100 * time.Millisecond, func(s *scene) time.Time { s.frame("hang"); return s.lastFrame() }},
}

// signal sends a signal to the whole group, as a keyboard does.
func (s *scene) signal(sig syscall.Signal) time.Time {
	at := time.Now()
	if err := syscall.Kill(-s.cmd.Process.Pid, sig); err != nil {
		s.t.Fatal(err)
	}
	return at
}

// trial gives the time from cause i to the off state. The cause comes some time after
// the work has begun, so that it meets the keeper while it waits and while it polls.
func trial(t *testing.T, i, n int) time.Duration {
	t.Helper()
	s := newScene(t, 120*time.Millisecond+time.Duration(n)*usual.poll/15)
	from := len(s.gate.notes.all())
	at := causes[i].do(s)
	took := s.whenOff(from).Sub(at)
	s.silence()
	if causes[i].name == "hung" {
		s.cmd.Process.Kill()
	}
	s.ended()
	return took
}

func TestEveryCauseLeadsToTheOffState(t *testing.T) {
	for i, c := range causes {
		t.Run(c.name, func(t *testing.T) {
			t.Parallel()
			took := trial(t, i, 0)
			if took < c.limit-100*time.Millisecond || took > c.limit+2*time.Second { // a loaded machine; figures are TestTimeToOff's
				t.Errorf("%v after the cause", took)
			}
		})
	}
}

// TestTimeToOff prints figures, one cause after the other, for scripts/bench.
func TestTimeToOff(t *testing.T) {
	if os.Getenv("GATESILL_LONG") == "" {
		t.Skip("GATESILL_LONG=1 measures")
	}
	const trials = 15
	fmt.Printf("%-16s %6s %9s %9s %9s  %s\n", "cause", "trials", "limit/ms", "median/ms", "max/ms", "goal/ms")
	for i, c := range causes {
		var took []time.Duration
		for n := range trials {
			took = append(took, trial(t, i, n))
		}
		slices.Sort(took)
		ms := func(d time.Duration) float64 { return float64(d) / float64(time.Millisecond) }
		median := took[trials/2]
		verdict := "reached"
		if median > c.limit+c.goal {
			verdict = "NOT REACHED"
		}
		fmt.Printf("%-16s %6d %9.0f %9.1f %9.1f  %.0f %s\n", strings.NewReplacer(",", "", " ", "-").Replace(c.name), trials, ms(c.limit), ms(median), ms(took[trials-1]), ms(c.limit+c.goal), verdict)
	}
}
