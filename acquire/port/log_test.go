package port

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

func logFile(t testing.TB, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "meter.log")
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

// play reads a line to its end and gives what came, with its times.
func play(t *testing.T, c Conn) (got []chunk, silent int) {
	t.Helper()
	start := time.Now()
	buf := make([]byte, 4)
	for {
		n, err := c.Read(buf)
		switch {
		case errors.Is(err, ErrEnd):
			if _, again := c.Read(buf); !errors.Is(again, ErrEnd) {
				t.Errorf("after the end: %v", again)
			}
			return got, silent
		case err != nil:
			t.Fatal(err)
		case n == 0:
			silent++
		default:
			got = append(got, chunk{time.Since(start), bytes.Clone(buf[:n])})
		}
	}
}

func TestLogPlaysAtItsPace(t *testing.T) {
	t.Parallel()
	path := logFile(t, "# a meter\n0.0 31 32\n\n0.3 333435363738 # long\r\n0.300001 39\n")
	for _, x := range []struct {
		query string
		speed float64
	}{{"", 1}, {"?speed=10", 10}, {"?speed=0.5", 0.5}} {
		c, err := Open("log:"+path+x.query, Settings{})
		if err != nil {
			t.Fatal(err)
		}
		got, silent := play(t, c)
		var text []string
		for _, g := range got {
			text = append(text, string(g.bytes))
		}
		if s := strings.Join(text, "|"); s != "12|3456|78|9" {
			t.Fatalf("speed %g: %s", x.speed, s)
		}
		least := time.Duration(0.3 / x.speed * float64(time.Second))
		if got[0].at > least/2+time.Second || got[1].at < least-5*time.Millisecond || got[1].at > least+2*time.Second {
			t.Errorf("speed %g: at %v and %v", x.speed, got[0].at, got[1].at)
		}
		if silent == 0 {
			t.Errorf("speed %g: no time-out in the silence", x.speed)
		}
		c.Close()
	}
}

func TestLogErrorsNameTheLine(t *testing.T) {
	for text, where := range map[string]string{
		"0 31\nx 31\n":           ":2:",
		"# c\n\n-1 31":           ":3:",
		"1 31\n0.5 32":           ":2:",
		"0 3":                    ":1:",
		"0 3g":                   ":1:",
		"0\n":                    ":1:",
		"NaN 31":                 ":1:",
		"Inf 31":                 ":1:",
		"1e300 31":               ":1:",
		"0 31 \xff":              ":1:",
		strings.Repeat("1", 2e6): ":1:",
	} {
		path := logFile(t, text)
		_, err := Open("log:"+path, Settings{})
		if !errors.Is(err, ErrSettings) || !strings.Contains(err.Error(), path+where) {
			t.Errorf("%.20q: %v", text, err)
		}
	}
	path := logFile(t, "0 31\n")
	for _, q := range []string{"?speed=0", "?speed=-1", "?speed=NaN", "?speed=Inf", "?speed=x", "?pace=2", "?speed=1&speed=2", "?%zz"} {
		if _, err := Open("log:"+path+q, Settings{}); !errors.Is(err, ErrSettings) {
			t.Errorf("%s: %v", q, err)
		}
	}
}

func TestLogCloseAndDiscard(t *testing.T) {
	c, err := openLog("log:x", logFile(t, "0 31\n0.001 32\n60 33\n"), 10*time.Second)
	if err != nil {
		t.Fatal(err)
	}
	time.Sleep(5 * time.Millisecond)
	if err := c.Discard(); err != nil {
		t.Fatal(err)
	}
	if n, err := c.Write([]byte("READ?\n")); n != 6 || err != nil {
		t.Errorf("a log takes what is written: %d, %v", n, err)
	}
	ended := make(chan error)
	go func() { _, err := c.Read(make([]byte, 4)); ended <- err }()
	time.Sleep(10 * time.Millisecond)
	c.Close()
	if err := <-ended; !errors.Is(err, ErrClosed) {
		t.Errorf("got %v", err)
	}
	if _, err := c.Write(nil); !errors.Is(err, ErrClosed) {
		t.Errorf("got %v", err)
	}
}

// What a recorder writes is read back as it was.
func TestRecorderThereAndBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var b bytes.Buffer
		zero := time.Now()
		r := NewRecorder(&b, zero)
		var want []chunk
		var last time.Duration
		for i := range rapid.IntRange(0, 20).Draw(t, "chunks") {
			at := time.Duration(rapid.Int64Range(-1000, 5e9).Draw(t, "at")) * time.Microsecond
			data := rapid.SliceOfN(rapid.Byte(), 0, 20).Draw(t, "bytes")
			if err := r.Bytes(data, zero.Add(at)); err != nil {
				t.Fatal(err)
			}
			if i == 3 {
				r.Note("plugged in\r\nagain # 1")
			}
			if len(data) > 0 {
				last = max(last, at)
				want = append(want, chunk{last, data})
			}
		}
		got, err := readLog("log", &b)
		if err != nil {
			t.Fatal(err)
		}
		if fmt.Sprint(got) != fmt.Sprint(want) {
			t.Fatalf("got %v\nwant %v", got, want)
		}
	})
}

func FuzzReadLog(f *testing.F) {
	for _, s := range []string{"0 31 32\n1.5 3334 # x\n", "#\n\n", "1e3 00", "x"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		chunks, err := readLog("log", bytes.NewReader(text))
		if err != nil {
			if !errors.Is(err, ErrSettings) || !strings.HasPrefix(err.Error(), "log:") {
				t.Fatal(err)
			}
			return
		}
		last := time.Duration(0)
		for _, c := range chunks {
			if c.at < last || len(c.bytes) == 0 {
				t.Fatalf("%v", chunks)
			}
			last = c.at
		}
	})
}
