package port

import (
	"context"
	"errors"
	"net"
	"sync"
	"testing"
	"time"
)

// server takes one client and hands it to f.
func server(t *testing.T, f func(c net.Conn)) (address string) {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Skipf("no sockets here: %v", err)
	}
	var mu sync.Mutex
	var all []net.Conn // which would be closed under the test when they are forgotten
	t.Cleanup(func() {
		l.Close()
		mu.Lock()
		defer mu.Unlock()
		for _, c := range all {
			c.Close()
		}
	})
	go func() {
		for {
			c, err := l.Accept()
			if err != nil {
				return
			}
			mu.Lock()
			all = append(all, c)
			mu.Unlock()
			go f(c)
		}
	}()
	return "tcp:" + l.Addr().String()
}

func TestHostPort(t *testing.T) {
	for target, want := range map[string]string{
		"meter": "meter:5025", "10.0.0.7": "10.0.0.7:5025", "10.0.0.7:9999": "10.0.0.7:9999",
		"[::1]": "[::1]:5025", "::1": "[::1]:5025", "[::1]:80": "[::1]:80", "[fe80::1%eth0]:80": "[fe80::1%eth0]:80",
	} {
		if got, err := hostPort(target); err != nil || got != want {
			t.Errorf("%s: %s, %v", target, got, err)
		}
	}
	for _, target := range []string{"", ":80", "meter:", "a:b:c"} {
		if got, err := hostPort(target); err == nil {
			t.Errorf("%s: %s", target, got)
		}
	}
}

func TestSocket(t *testing.T) {
	t.Parallel()
	answered := make(chan bool, 10)
	address := server(t, func(c net.Conn) {
		defer c.Close()
		buf := make([]byte, 64)
		for {
			n, err := c.Read(buf)
			if err != nil || string(buf[:n]) == "end\n" {
				return
			}
			c.Write(buf[:n])
			answered <- true
		}
	})
	c, err := Open(address, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	defer c.Close()
	buf := make([]byte, 64)
	for range 3 {
		if n, err := c.Read(buf); n != 0 || err != nil {
			t.Fatalf("a time-out is no error: %d, %v", n, err)
		}
	}
	if n, err := c.Read(nil); n != 0 || err != nil {
		t.Fatalf("nor is an empty read: %d, %v", n, err)
	}
	c.Write([]byte("old\n"))
	<-answered // and on one computer it is there at once
	if err := c.Discard(); err != nil {
		t.Fatal(err)
	}
	c.Write([]byte("new\n"))
	if got := readAll(t, c, 4); got != "new\n" {
		t.Errorf("got %q", got)
	}
	c.Write([]byte("end\n"))
	staysLostSocket(t, c)
}

func staysLostSocket(t *testing.T, c Conn) {
	t.Helper()
	var err error
	buf := make([]byte, 64)
	for end := time.Now().Add(5 * time.Second); err == nil && time.Now().Before(end); {
		_, err = c.Read(buf)
	}
	if !errors.Is(err, ErrLost) {
		t.Fatalf("got %v", err)
	}
	if _, err := c.Write([]byte("x")); !errors.Is(err, ErrLost) {
		t.Errorf("Write: %v", err)
	}
	c.Close()
	if _, err := c.Write([]byte("x")); !errors.Is(err, ErrClosed) {
		t.Errorf("Write after Close: %v", err)
	}
}

func TestSocketReset(t *testing.T) {
	t.Parallel()
	c, err := Open(server(t, func(c net.Conn) {
		c.Read(make([]byte, 8))
		c.(*net.TCPConn).SetLinger(0)
		c.Close()
	}), Settings{})
	if err != nil {
		t.Fatal(err)
	}
	c.Write([]byte("x"))
	staysLostSocket(t, c)
}

func TestSocketCloseWhileReadingAndWriting(t *testing.T) {
	t.Parallel()
	address := server(t, func(net.Conn) {}) // takes a client and never reads
	for i := range 100 {
		c, err := openTCP(context.Background(), address, address[4:], 10*time.Second)
		if err != nil {
			t.Fatal(err)
		}
		ended := make(chan error, 1)
		go func() {
			if i%2 == 0 {
				_, err := c.Read(make([]byte, 8))
				ended <- err
				return
			}
			_, err := c.Write(make([]byte, 64<<20))
			ended <- err
		}()
		time.Sleep(time.Duration(i%5) * 100 * time.Microsecond)
		c.Close()
		select {
		case err := <-ended:
			if !errors.Is(err, ErrClosed) {
				t.Fatalf("round %d: %v", i, err)
			}
		case <-time.After(5 * time.Second):
			t.Fatalf("round %d goes on", i)
		}
	}
}

func TestSocketWriteEnds(t *testing.T) {
	t.Parallel()
	c, err := Open(server(t, func(net.Conn) {}), Settings{})
	if err != nil {
		t.Fatal(err)
	}
	defer c.Close()
	if n, err := c.Write(make([]byte, 64<<20)); !errors.Is(err, ErrStuck) {
		t.Errorf("got %d, %v", n, err)
	}
}

func TestNobodyAtTheSocket(t *testing.T) {
	t.Parallel()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Skip(err)
	}
	address := "tcp:" + l.Addr().String()
	l.Close()
	if _, err := Open(address, Settings{}); !errors.Is(err, ErrAbsent) {
		t.Errorf("got %v", err)
	}
	for _, a := range []string{"tcp:", "tcp::80", "tcp:a:b:c"} {
		if _, err := Open(a, Settings{}); !errors.Is(err, ErrSettings) {
			t.Errorf("%s: %v", a, err)
		}
	}
}
