package main

import (
	"os"
	"sync"

	"golang.org/x/term"
)

// screenSize is the size of the terminal on stdout, 0, 0 when it cannot be had.
func screenSize() (width, height int) {
	width, height, err := term.GetSize(int(os.Stdout.Fd()))
	if err != nil {
		return 0, 0
	}
	return width, height
}

// keys gives the keyboard key by key, without waiting for the end of a line. An
// interrupt is a key among the others then. The reading goes on until the program
// ends, for a read of a terminal cannot be called off.
func keys() (<-chan byte, func(), error) {
	fd := int(os.Stdin.Fd())
	before, err := term.MakeRaw(fd)
	if err != nil {
		return nil, nil, err
	}
	out := make(chan byte)
	ended := make(chan struct{})
	go func() {
		var b [1]byte
		for {
			n, err := os.Stdin.Read(b[:])
			if err != nil {
				return
			}
			if n == 0 {
				continue
			}
			select {
			case out <- b[0]:
			case <-ended:
				return
			}
		}
	}()
	return out, sync.OnceFunc(func() {
		close(ended)
		term.Restore(fd, before)
	}), nil
}
