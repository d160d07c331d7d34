package store

import (
	"context"
	"errors"
	"sync"
	"time"

	"gatesill/store/record"
)

// commitEvery is how far apart the commits of live readings lie at most.
const commitEvery = 50 * time.Millisecond

// Live keeps readings as they come in: they are committed in groups at most
// 50 ms apart, in the order in which they were given. Its methods may be called
// by several goroutines; Add does not wait for the disk.
type Live struct {
	db   *DB
	wake chan struct{}
	done chan struct{}

	mu       sync.Mutex
	waiting  []record.Reading
	events   []record.Event
	given    int64 // readings taken by Add
	kept     int64 // readings whose commit has returned
	closing  bool
	err      error
	progress *sync.Cond
}

// NewLive begins to keep readings. Close must be called.
func (db *DB) NewLive(ctx context.Context) *Live {
	l := &Live{db: db, wake: make(chan struct{}, 1), done: make(chan struct{})}
	l.progress = sync.NewCond(&l.mu)
	go l.run(context.WithoutCancel(ctx))
	return l
}

// Add takes readings to be kept. The sweeps they belong to must have been
// started. It fails when an earlier commit failed: then nothing more is kept.
func (l *Live) Add(rs ...record.Reading) error {
	return l.take(func() { l.waiting, l.given = append(l.waiting, rs...), l.given+int64(len(rs)) })
}

// AddEvent takes an event of the session to be kept, in the order among the
// readings that were given before.
func (l *Live) AddEvent(e record.Event) error {
	return l.take(func() { l.events = append(l.events, e) })
}

func (l *Live) take(put func()) error {
	l.mu.Lock()
	defer l.mu.Unlock()
	if l.err != nil {
		return l.err
	}
	if l.closing {
		return errors.New("live readings: closed")
	}
	put()
	select {
	case l.wake <- struct{}{}:
	default:
	}
	return nil
}

// Kept is how many of the readings given so far are safe: their commit has
// returned.
func (l *Live) Kept() int64 {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.kept
}

// Flush waits until everything given before is safe.
func (l *Live) Flush() error {
	l.mu.Lock()
	defer l.mu.Unlock()
	for want := l.given; l.err == nil && (l.kept < want || len(l.events) > 0); {
		l.progress.Wait()
	}
	return l.err
}

// Close keeps what was given and ends. The store stays open.
func (l *Live) Close() error {
	l.mu.Lock()
	l.closing = true
	l.mu.Unlock()
	select {
	case l.wake <- struct{}{}:
	default:
	}
	<-l.done
	return l.err
}

// run commits what is waiting, then lets more gather for the rest of the
// interval.
func (l *Live) run(ctx context.Context) {
	defer close(l.done)
	for {
		<-l.wake
		l.mu.Lock()
		rs, es, closing := l.waiting, l.events, l.closing
		l.waiting = nil
		l.mu.Unlock()
		began := time.Now()
		var err error
		if len(rs)+len(es) > 0 {
			err = l.db.Update(ctx, func(tx *Tx) error {
				return errors.Join(tx.AddReadings(rs), tx.AddEvents(es))
			})
		}
		l.mu.Lock()
		if err != nil {
			l.err = err
		} else {
			l.kept += int64(len(rs))
			l.events = l.events[len(es):]
		}
		more := len(l.waiting)+len(l.events) > 0
		l.progress.Broadcast()
		l.mu.Unlock()
		if err != nil || closing && !more {
			return
		}
		if more {
			select {
			case l.wake <- struct{}{}:
			default:
			}
		}
		if !closing {
			// Half the interval: the commit itself takes the rest.
			time.Sleep(max(0, commitEvery/2-time.Since(began)))
		}
	}
}
