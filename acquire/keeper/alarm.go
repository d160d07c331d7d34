package keeper

import (
	"bufio"
	"fmt"
	"sync"
	"time"
)

// alarm says once, to every conversation and to the loop, that it is over.
type alarm struct {
	raised chan struct{}
	limit  time.Duration

	mu       sync.Mutex
	why      *cause
	beat     *time.Timer // nil: not watched
	underway int         // orders that are not answered yet: the loop that beats waits for them
}

type cause struct {
	reason string
	at     time.Time
	order  int  // its number, or unasked
	gone   bool // no drain current flows any more
}

func newAlarm(limit time.Duration) *alarm {
	return &alarm{raised: make(chan struct{}), limit: limit}
}

func (a *alarm) raise(c cause) {
	a.mu.Lock()
	defer a.mu.Unlock()
	if a.why == nil {
		a.why = &c
		close(a.raised)
	}
}

func (a *alarm) cause() (cause, bool) {
	a.mu.Lock()
	defer a.mu.Unlock()
	if a.why == nil {
		return cause{order: unasked, at: time.Now()}, false
	}
	return *a.why, true
}

// watch starts the heartbeat's clock.
func (a *alarm) watch() {
	a.mu.Lock()
	defer a.mu.Unlock()
	a.beat = time.AfterFunc(a.limit, func() {
		a.raise(cause{reason: fmt.Sprintf("no heartbeat for %v", a.limit), at: time.Now(), order: unasked})
	})
}

func (a *alarm) unwatch() {
	a.mu.Lock()
	defer a.mu.Unlock()
	if a.beat != nil {
		a.beat.Stop()
		a.beat = nil
	}
}

// heard sets the clock anew. It stands still while an order is under way; orders is
// +1 when one came in, -1 when it was answered.
func (a *alarm) heard(orders int) {
	a.mu.Lock()
	defer a.mu.Unlock()
	a.underway += orders
	if a.beat == nil {
		return
	}
	a.beat.Stop()
	if a.underway == 0 {
		a.beat.Reset(a.limit)
	}
}

// listen takes orders in. It never waits for the loop, so that the end of the input
// is seen at once whatever the loop does.
func (a *alarm) listen(in *bufio.Scanner, orders chan<- order) {
	defer close(orders)
	defer func() {
		if p := recover(); p != nil {
			a.raise(cause{reason: fmt.Sprintf("fault of the keeper: %v", p), at: time.Now(), order: unasked})
		}
	}()
	bad := func(reason string) {
		a.raise(cause{reason: reason, at: time.Now(), order: unasked})
	}
	for in.Scan() {
		o, err := parseOrder(in.Bytes())
		if err != nil {
			bad(err.Error())
			continue
		}
		if o.Do == doBeat {
			a.heard(0)
			continue
		}
		at := time.Now()
		if o.Do != doStatus {
			a.heard(+1)
		}
		if o.Do == doOff || o.Do == doBye {
			if o.Reason == "" {
				o.Reason = "end of work"
			}
			a.raise(cause{reason: o.Reason, at: at, order: o.ID, gone: o.Gone})
		}
		select {
		case orders <- o:
		default:
			bad("more orders than can be followed")
		}
	}
	if err := in.Err(); err != nil {
		bad("orders end: " + err.Error())
		return
	}
	bad("measuring program ended")
}
