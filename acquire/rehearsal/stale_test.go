//go:build linux || darwin

package rehearsal

import (
	"testing"
	"time"
)

// Who opens a line reads what is sent from then on, not what was sent to somebody
// who had it open before, nor what nobody was there for.
func TestNothingStale(t *testing.T) {
	t.Parallel()
	r := start(t, fast(t, 0.001))
	path := r.Lines()["gate"]
	l := open(t, path)
	time.Sleep(100 * time.Millisecond) // unread
	l.f.Close()
	time.Sleep(100 * time.Millisecond)
	l = open(t, path)
	time.Sleep(20 * time.Millisecond)
	s, err := r.Status()
	if err != nil {
		t.Fatal(err)
	}
	text := l.until("a line", func(b []byte) bool { return len(b) > 30 })
	first := firstNumber(t, text)
	if first < 100 { // the oldest is what would have been kept
		t.Errorf("began with number %g, when %g had been sent", first, s.At/0.001)
	}
}
