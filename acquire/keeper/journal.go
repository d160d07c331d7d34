package keeper

import (
	"fmt"
	"os"
	"sync"
	"time"
)

// journal is the file of everything said and done. A disk that hangs must not stop
// the way off, so a goroutine of its own writes, and what it cannot take is counted
// and dropped.
type journal struct {
	lines chan string
	done  chan struct{}
	once  sync.Once

	mu      sync.Mutex
	closed  bool
	dropped int
}

// openJournal appends to a file; "" is no journal at all.
func openJournal(path string) (*journal, error) {
	if path == "" {
		return nil, nil
	}
	f, err := os.OpenFile(path, os.O_APPEND|os.O_CREATE|os.O_WRONLY, 0o644)
	if err != nil {
		return nil, fmt.Errorf("%w: its log: %w", ErrConfig, err)
	}
	j := &journal{lines: make(chan string, 4096), done: make(chan struct{})}
	go func() {
		defer close(j.done)
		defer f.Close()
		for s := range j.lines {
			f.WriteString(s) // a full disk must not stop the way off; nobody is left to be told
		}
	}()
	return j, nil
}

func (j *journal) note(format string, a ...any) {
	if j == nil {
		return
	}
	s := time.Now().UTC().Format("2006-01-02T15:04:05.000000Z ") + fmt.Sprintf(format, a...) + "\n"
	j.mu.Lock()
	defer j.mu.Unlock()
	if j.closed {
		return
	}
	if j.dropped > 0 {
		s = fmt.Sprintf("%d lines were dropped here\n", j.dropped) + s
	}
	select {
	case j.lines <- s:
		j.dropped = 0
	default:
		j.dropped++
	}
}

// close waits for the disk, but not for long.
func (j *journal) close() {
	if j == nil {
		return
	}
	j.once.Do(func() {
		j.mu.Lock()
		j.closed = true
		close(j.lines)
		j.mu.Unlock()
		select {
		case <-j.done:
		case <-time.After(time.Second):
		}
	})
}
