//go:build linux || darwin

package job

import (
	"context"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/acquire"
	"gatesill/acquire/rehearsal"
	"gatesill/store"
	"gatesill/store/record"
)

// numbered is a simulated bench of three lines of text, each with so many numbered
// frames a second.
func numbered(t *testing.T, perSecond float64) *rehearsed {
	t.Helper()
	c, err := rehearsal.Standard(rehearsal.Quick)
	require.NoError(t, err)
	c.Supplies, c.Devices = nil, nil
	for i := range c.Meters {
		m := &c.Meters[i]
		m.Speaks, m.Counting, m.Counts, m.Tops, m.Cycle, m.Integration = "text", true, 1e6, []float64{1000}, 1/perSecond, 0
	}
	r, err := rehearse(context.Background(), c)
	require.NoError(t, err)
	t.Cleanup(func() {
		if err := r.close(); err != nil {
			t.Error(err)
		}
	})
	return r
}

// sequence follows the numbers of one line.
type sequence struct {
	frames, lost, wrong int
	next                int // -1: none yet
}

func (s *sequence) take(r record.Reading) {
	n := int(math.Round(r.Value.Float() * 1e3))
	switch {
	case r.Refused != "" || !r.Value.IsKnown() || s.next >= 0 && n < s.next:
		s.wrong++ // twice, or out of order, or not a number
	case s.next >= 0:
		s.lost += n - s.next
	}
	s.frames++
	s.next = n + 1
}

type sequences map[string]*sequence

func (q sequences) take(r record.Reading) {
	if q[r.Role] == nil {
		q[r.Role] = &sequence{next: -1}
	}
	q[r.Role].take(r)
}

func (q sequences) sum() (frames, lost, wrong int) {
	for _, s := range q {
		frames, lost, wrong = frames+s.frames, lost+s.lost, wrong+s.wrong
	}
	return frames, lost, wrong
}

// ownCPU is what this process has used, s.
func ownCPU() float64 {
	var u syscall.Rusage
	if syscall.Getrusage(syscall.RUSAGE_SELF, &u) != nil {
		return math.NaN()
	}
	return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e9
}

// listenFor listens to the bench for a while and gives each event to take. It returns the
// share of a core that took, and how long it was.
func listenFor(t *testing.T, r *rehearsed, long time.Duration, start time.Time, take func(acquire.Event)) (share, seconds float64) {
	t.Helper()
	ctx, stop := context.WithTimeout(context.Background(), long)
	defer stop()
	cpu, began := ownCPU(), time.Now()
	err := acquire.Listen(ctx, Sources(r.bench), start, take)
	require.ErrorIs(t, err, context.DeadlineExceeded)
	seconds = time.Since(began).Seconds()
	return (ownCPU() - cpu) / seconds, seconds
}

// TestThroughput listens to three lines of 1,000 numbered frames a second, with the
// bench in a process of its own: no frame is lost, comes twice or out of order, neither in what is
// heard nor in what the store holds. GATESILL_LONG=1: 20 s each, with figures for
// scripts/bench.
func TestThroughput(t *testing.T) {
	long, bench := 1*time.Second, os.Getenv("GATESILL_LONG") != ""
	if bench {
		long = 20 * time.Second
	}
	r := numbered(t, 1000)
	tell := func(name, format string, args ...any) {
		if bench {
			fmt.Printf("%-40s "+format+"\n", append([]any{name + ":"}, args...)...)
		}
	}
	clean := func(name string, q sequences, seconds float64) {
		frames, lost, wrong := q.sum()
		tell(name+" frames", "%d (%.0f/s), %d lost, %d doubled or out of order", frames, float64(frames)/seconds, lost, wrong)
		if lost > 0 || wrong > 0 || len(q) != 3 {
			t.Errorf("%s: %d lines, %d frames, %d lost, %d doubled or out of order", name, len(q), frames, lost, wrong)
		}
		if float64(frames) < 2000*seconds { // of 3,000/s; opening takes its time
			t.Errorf("%s: %d frames in %.1f s", name, frames, seconds)
		}
	}
	bad := atomic.Int64{}
	heard := sequences{}
	share, seconds := listenFor(t, r, long, time.Now(), func(e acquire.Event) {
		if e.Err != nil {
			bad.Add(1)
		}
		for _, rd := range e.Readings {
			heard.take(rd)
		}
	})
	clean("heard", heard, seconds)
	tell("cpu-decoding", "%.1f %% of a core", 100*share)

	env := &Env{Store: filepath.Join(t.TempDir(), "store.db"), Out: io.Discard, Err: io.Discard, Quiet: true}
	s, err := env.openSitting(context.Background(), sittingRequest{Lot: "fast", Bench: r.bench, Given: r.bench.Given})
	require.NoError(t, err)
	require.NoError(t, s.begin(context.Background(), "D1", record.Up))
	sweep := s.sweep.ID
	heard = sequences{}
	share, seconds = listenFor(t, r, long, s.started, func(e acquire.Event) {
		if e.Err != nil {
			bad.Add(1)
		}
		for _, rd := range e.Readings {
			heard.take(rd)
		}
		if err := s.hear(e); err != nil {
			t.Error(err)
		}
	})
	flushed := time.Now()
	require.NoError(t, s.live.Flush())
	late := time.Since(flushed)
	require.NoError(t, s.close())
	tell("cpu-with-store", "%.1f %% of a core", 100*share)
	tell("flush", "%.1f ms after the last frame", float64(late)/1e6)

	db, err := store.Open(context.Background(), env.Store, store.Options{})
	require.NoError(t, err)
	defer db.Close()
	kept := sequences{}
	require.NoError(t, db.View(context.Background(), func(tx *store.Tx) error {
		rs, err := tx.Readings(sweep)
		for _, rd := range rs {
			kept.take(rd)
		}
		return err
	}))
	clean("kept", kept, seconds)
	h, _, _ := heard.sum()
	k, _, _ := kept.sum()
	require.Equal(t, h, k, "heard and kept")
	require.Zero(t, bad.Load(), "events with an error")
	status, err := r.Status()
	require.NoError(t, err)
	for name, l := range status.Lines {
		require.Zero(t, l.Overrun, "line %s: bytes that were not read in time", name)
	}
}
