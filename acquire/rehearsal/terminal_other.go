//go:build !linux && !darwin

package rehearsal

import "syscall"

func terminals() error { return ErrNoTerminals }

func openTerminal() (*terminal, error) { return nil, ErrNoTerminals }

func (t *terminal) send([]byte) (n int, open bool) { return 0, false }

func (t *terminal) forget() {}

func (t *terminal) open() bool { return false }

func apart() *syscall.SysProcAttr { return nil }

func cpuSeconds() float64 { return 0 }
