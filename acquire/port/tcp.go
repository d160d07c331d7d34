package port

import (
	"context"
	"errors"
	"fmt"
	"net"
	"os"
	"strings"
	"time"
)

// scpiPort is the port of raw SCPI sockets (registered as scpi-raw; from memory).
const scpiPort = "5025"

// socket is a TCP line.
type socket struct {
	line
	c *net.TCPConn
}

func openTCP(ctx context.Context, address, target string, readTimeout time.Duration) (Conn, error) {
	target, err := hostPort(target)
	if err != nil {
		return nil, fmt.Errorf("%s: %w: %w", address, ErrSettings, err)
	}
	d := net.Dialer{
		Timeout: dialTimeout,
		// An instrument that was switched off sends nothing, not even an end: the
		// kernel asks after 5 s of silence, and gives up after three more times 2 s.
		KeepAliveConfig: net.KeepAliveConfig{Enable: true, Idle: 5 * time.Second, Interval: 2 * time.Second, Count: 3},
	}
	c, err := d.DialContext(ctx, "tcp", target)
	if err != nil {
		return nil, fmt.Errorf("%s: %w: %w", address, ErrAbsent, err)
	}
	t := c.(*net.TCPConn)
	if err := t.SetNoDelay(true); err != nil {
		t.Close()
		return nil, fmt.Errorf("%s: %w: %w", address, ErrAbsent, err)
	}
	return &socket{line: line{address: address, readTimeout: readTimeout}, c: t}, nil
}

// hostPort adds the port where none is said.
func hostPort(target string) (string, error) {
	host, port, err := net.SplitHostPort(target)
	if err != nil {
		host, port = strings.TrimSuffix(strings.TrimPrefix(target, "["), "]"), scpiPort
		if strings.Contains(host, ":") && net.ParseIP(host) == nil {
			return "", fmt.Errorf("%q is neither HOST nor HOST:PORT", target)
		}
	}
	if host == "" || port == "" {
		return "", fmt.Errorf("%q is neither HOST nor HOST:PORT", target)
	}
	return net.JoinHostPort(host, port), nil
}

func (s *socket) Read(p []byte) (int, error) {
	if err := s.state(); err != nil || len(p) == 0 {
		return 0, err
	}
	if err := s.c.SetReadDeadline(time.Now().Add(s.readTimeout)); err != nil {
		return 0, s.failed(err)
	}
	n, err := s.c.Read(p)
	if n > 0 || errors.Is(err, os.ErrDeadlineExceeded) {
		return n, nil
	}
	return 0, s.failed(err)
}

func (s *socket) Write(p []byte) (int, error) {
	if err := s.state(); err != nil {
		return 0, err
	}
	limit := writeLimit(len(p), 0)
	if err := s.c.SetWriteDeadline(time.Now().Add(limit)); err != nil {
		return 0, s.failed(err)
	}
	n, err := s.c.Write(p)
	if errors.Is(err, os.ErrDeadlineExceeded) {
		return n, s.stuck(n, len(p), limit)
	}
	if err != nil {
		return n, s.failed(err)
	}
	return n, nil
}

// Discard reads what has arrived. It gives up after as much as no instrument has to
// say, lest a stream hold it forever.
func (s *socket) Discard() error {
	if err := s.state(); err != nil {
		return err
	}
	buf := make([]byte, 4096)
	for range 256 {
		n, err := arrived(s.c, buf)
		if err != nil {
			return s.failed(err)
		}
		if n == 0 {
			break
		}
	}
	return nil
}

// DiscardOutput does nothing: what a socket took is on its way.
func (s *socket) DiscardOutput() error { return s.state() }

func (s *socket) Close() error {
	if !s.shut() {
		return nil
	}
	if s.wasStuck.Load() {
		s.c.SetLinger(0) // what the far end does not take is dropped
	}
	if err := s.c.Close(); err != nil {
		return fmt.Errorf("%s: %w", s.address, err)
	}
	return nil
}
