//go:build linux || darwin

package rehearsal

import (
	"bytes"
	"math"
	"os"
	"strconv"
	"sync"
	"testing"
	"time"
)

// count reads numbered frames of a line for a while and tells how many came, how
// many numbers were left out, and how many came twice or out of order.
func count(l *line, wait time.Duration) (frames, lost, wrong int) {
	next := -1.0
	for end := time.Now().Add(wait); time.Now().Before(end); {
		if err := l.more(50 * time.Millisecond); err != nil {
			l.t.Error(err)
			return
		}
		for {
			n := bytes.IndexByte(l.buf, '\n')
			if n < 0 {
				break
			}
			text, _, _ := bytes.Cut(l.buf[:n], []byte(" "))
			l.buf = l.buf[n+1:]
			x, err := strconv.ParseFloat(string(text), 64)
			x = math.Round(x * 1e3)
			switch {
			case err != nil || next >= 0 && x < next:
				wrong++
			case next >= 0:
				lost += int(x - next)
			}
			frames++
			next = x + 1
		}
	}
	return frames, lost, wrong
}

// firstNumber is the first whole frame's.
func firstNumber(t *testing.T, text string) float64 {
	t.Helper()
	for k, f := range bytes.Split([]byte(text), []byte("\n")) {
		number, _, ok := bytes.Cut(f, []byte(" "))
		if x, err := strconv.ParseFloat(string(number), 64); ok && k > 0 && err == nil {
			return math.Round(x * 1e3)
		}
	}
	t.Fatalf("no number in %q", text)
	return 0
}

func fast(t testing.TB, cycle float64) Config {
	c := quick(t)
	c.Supplies = nil
	for i := range c.Meters {
		m := &c.Meters[i]
		m.Speaks, m.Counting, m.Counts, m.Tops, m.Cycle, m.Integration = "text", true, 1e6, []float64{1000}, cycle, 0
	}
	return c
}

// Numbered frames come each once and in order.
func TestNumberedFrames(t *testing.T) {
	t.Parallel()
	r := start(t, fast(t, 0.001))
	frames, lost, wrong := count(open(t, r.Lines()["gate"]), 300*time.Millisecond)
	if frames < 50 || lost > 0 || wrong > 0 {
		t.Errorf("%d frames, %d lost, %d wrong", frames, lost, wrong)
	}
}

// TestFigures prints what the process costs and how fast it can be; it asserts only
// that nothing is lost.
func TestFigures(t *testing.T) {
	if os.Getenv("GATESILL_LONG") == "" {
		t.Skip("takes 40 s: set GATESILL_LONG=1")
	}
	const wait = 10 * time.Second
	run := func(name string, c Config, poll string) {
		r := start(t, c)
		if len(c.Devices) > 0 {
			r.Insert(c.Devices[0].Name)
		}
		before, _ := r.Status()
		var g sync.WaitGroup
		var mu sync.Mutex
		var frames, lost, wrong int
		for _, m := range c.Meters {
			l := open(t, r.Lines()[m.Role])
			g.Go(func() {
				if m.Speaks == "scpi" { // asked as fast as it answers
					for end := time.Now().Add(wait); time.Now().Before(end); {
						l.ask(poll)
						mu.Lock()
						frames++
						mu.Unlock()
					}
					return
				}
				f, n, w := count(l, wait)
				mu.Lock()
				frames += f
				if m.Counting {
					lost += n
					wrong += w
				}
				mu.Unlock()
			})
		}
		g.Wait()
		after, err := r.Status()
		if err != nil {
			t.Fatal(err)
		}
		over := 0
		for _, l := range after.Lines {
			over += l.Overrun
		}
		s := after.At - before.At
		t.Logf("%s: %.0f frames/s of all lines, %d lost, %d wrong, %d bytes overrun, process %.2f %% of a core", name, float64(frames)/s, lost, wrong, over, 100*(after.CPU-before.CPU)/s)
		if lost > 0 || wrong > 0 {
			t.Errorf("%s: %d lost, %d wrong", name, lost, wrong)
		}
		r.Close()
	}
	run("three quick meters, supplies, heating device", quick(t), "READ?\n")
	run("three lines at 1000/s", fast(t, 0.001), "")
	run("three lines at 5000/s", fast(t, 0.0002), "")
	c, _ := Standard(Handheld)
	r := start(t, c)
	for _, m := range c.Meters {
		l := open(t, r.Lines()[m.Role])
		go func() {
			for l.more(time.Second) == nil {
			}
		}()
	}
	before, _ := r.Status()
	time.Sleep(wait)
	after, _ := r.Status()
	t.Logf("three handhelds, paced bytes: process %.2f %% of a core", 100*(after.CPU-before.CPU)/(after.At-before.At))
}
