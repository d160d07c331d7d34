package scpi

import (
	"flag"
	"fmt"
	"io"
	"net"
	"os"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"gatesill/acquire/port"
)

// Most of these tests wait for replies, which does not need a processor each.
func TestMain(m *testing.M) {
	flag.Parse()
	flag.Set("test.parallel", "16")
	os.Exit(m.Run())
}

// instrument is an instrument that is not there. It takes messages one after the
// other, as instruments do, with the manners that a test gives it.
type instrument struct {
	eol      string        // behind a reply; "" is LF
	echo     bool          // sends back what it is sent
	dropRest bool          // an unknown command ends its message, *OPC? behind it included
	standing string        // a fault that is in the queue again after every "No error" and *CLS
	endless  string        // an entry that the queue gives whenever it is asked
	depth    int           // of the queue; 0: 30
	slow     time.Duration // before every reply

	// before is called with every message; what it gives is sent instead of a reply
	// if the second result says so. It may sleep.
	before func(n int, message string) (string, bool)

	mu    sync.Mutex
	got   []string // messages
	queue []string
	volt  string
}

func (i *instrument) messages() []string {
	i.mu.Lock()
	defer i.mu.Unlock()
	return slices.Clone(i.got)
}

// serve talks until the far end goes.
func (i *instrument) serve(line io.ReadWriter) {
	var buf []byte
	b := make([]byte, 256)
	for {
		n, err := line.Read(b)
		if err != nil {
			return
		}
		buf = append(buf, b[:n]...)
		for {
			message, rest, ok := strings.Cut(string(buf), "\n")
			if !ok {
				break
			}
			buf = []byte(rest)
			io.WriteString(line, i.take(message))
		}
	}
}

// take gives what is sent in reply to a message.
func (i *instrument) take(message string) string {
	i.mu.Lock()
	i.got = append(i.got, message)
	n := len(i.got)
	i.mu.Unlock()
	eol := i.eol
	if eol == "" {
		eol = "\n"
	}
	out := ""
	if i.echo {
		out = message + eol
	}
	if i.before != nil {
		if instead, ok := i.before(n, message); ok {
			return out + instead
		}
	}
	time.Sleep(i.slow)
	i.mu.Lock()
	defer i.mu.Unlock()
	var replies []string
	for _, cmd := range strings.Split(message, ";") {
		reply, known := i.obey(strings.TrimSpace(cmd))
		if reply != "" {
			replies = append(replies, reply)
		}
		if !known {
			i.fail(`-113,"Undefined header"`)
			if i.dropRest {
				break
			}
		}
	}
	if len(replies) > 0 {
		out += strings.Join(replies, ";") + eol
	}
	return out
}

func (i *instrument) fail(entry string) {
	depth := i.depth
	if depth == 0 {
		depth = 30
	}
	if len(i.queue) == depth { // the newest entry becomes the overflow
		i.queue[depth-1] = `-350,"Queue overflow"`
		return
	}
	i.queue = append(i.queue, entry)
}

func (i *instrument) obey(cmd string) (reply string, known bool) {
	verb, value, _ := strings.Cut(cmd, " ")
	switch strings.ToUpper(verb) {
	case "*CLS":
		i.queue = nil
		if i.standing != "" {
			i.queue = []string{i.standing}
		}
	case "*IDN?":
		return "Nobody,Model 1,0,1.02", true
	case "*OPC?":
		return "1", true
	case "SYST:ERR?":
		switch {
		case i.endless != "":
			return i.endless, true
		case len(i.queue) == 0:
			if i.standing != "" {
				i.queue = []string{i.standing}
			}
			return `0,"No error"`, true
		}
		e := i.queue[0]
		i.queue = i.queue[1:]
		return e, true
	case "VOLT":
		if strings.HasPrefix(value, "99") {
			i.fail(`-222,"Data out of range; ""VOLT"" is too great"`)
			break
		}
		i.volt = value
	case "VOLT?", "READ?":
		return i.volt, true
	case "BURST": // a command that goes wrong in many ways
		for n := range 50 {
			i.fail(fmt.Sprintf(`%d,"Fault %d"`, n+1, n+1))
		}
	default:
		return "", false
	}
	return "", true
}

// hookup makes lines to an instrument; pseudo-terminals are added where there are any.
var hookup = map[string]func(t testing.TB, i *instrument) port.Conn{"socket": overSocket}

func overSocket(t testing.TB, i *instrument) port.Conn {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Skipf("no sockets here: %v", err)
	}
	t.Cleanup(func() { l.Close() })
	go func() {
		c, err := l.Accept()
		if err != nil {
			return
		}
		defer c.Close()
		i.serve(c)
	}()
	c, err := port.Open("tcp:"+l.Addr().String(), port.Settings{})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.Close() })
	return c
}

// every runs a test over every kind of line.
func every(t *testing.T, i func() *instrument, o Options, f func(t *testing.T, i *instrument, talk *Talk)) {
	t.Helper()
	t.Parallel()
	for name, hook := range hookup {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			i := i()
			f(t, i, New(hook(t, i), o))
		})
	}
}
