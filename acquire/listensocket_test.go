package acquire

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"net"
	"strings"
	"sync/atomic"
	"testing"
	"time"
)

// A meter behind a socket that hangs up after some readings: it is set up and asked
// again, and no question is sent before the reply to the one before.
func TestListenSocket(t *testing.T) {
	t.Parallel()
	server, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Skip(err)
	}
	defer server.Close()
	var setUps, early atomic.Int32
	go func() {
		for {
			c, err := server.Accept()
			if err != nil {
				return
			}
			in := bufio.NewReader(c)
			for replies := 0; replies < 30; {
				line, err := in.ReadString('\n')
				if err != nil {
					break
				}
				switch strings.TrimSpace(line) {
				case "CONF:VOLT:DC 10;*OPC?":
					setUps.Add(1)
					fmt.Fprint(c, "1\n")
				case "SYST:ERR?":
					fmt.Fprint(c, "0,\"No error\"\n")
				case "READ?":
					replies++
					time.Sleep(2 * time.Millisecond)
					if in.Buffered() > 0 {
						early.Add(1)
					}
					fmt.Fprintf(c, "+%d.0E-1\r", replies)
					time.Sleep(time.Millisecond)
					fmt.Fprint(c, "\n")
				}
			}
			c.Close()
		}
	}()

	ctx, cancel := context.WithTimeout(context.Background(), 30*time.Second)
	defer cancel()
	var opened, lost, readings int
	begin := time.Now()
	err = Listen(ctx, []Source{{Address: "tcp:" + server.Addr().String(), Speaks: "scpi", Columns: gate, Setup: []string{"CONF:VOLT:DC 10"}}}, begin, func(e Event) {
		switch {
		case e.Opened:
			opened++
		case e.Lost:
			lost++
		case e.Err != nil:
			t.Error(e.Err)
		}
		for _, r := range e.Readings {
			readings++
			if x, ok := r.Value.Get(); !ok || x <= 0 || x > 3 || r.Unit != "V" || r.Refused != "" {
				t.Errorf("%+v", r)
			}
		}
		if readings >= 75 {
			cancel()
		}
	})
	if !errors.Is(err, context.Canceled) {
		t.Fatalf("%v after %d readings", err, readings)
	}
	if opened < 3 || lost < 2 || int(setUps.Load()) < opened {
		t.Errorf("opened %d, lost %d, set up %d times", opened, lost, setUps.Load())
	}
	if n := early.Load(); n > 0 {
		t.Errorf("%d questions before the reply was there", n)
	}
	t.Logf("%d readings in %v", readings, time.Since(begin).Round(time.Millisecond))
}
