package main

import (
	"bufio"
	"bytes"
	"io"
	"os"
	"sync"

	"golang.org/x/term"
)

// keyboard gives what is typed at the terminal, one rune a key, until restore is
// called; nil when stdin or stderr is no terminal. While it is in use a line
// feed alone does not return to the left margin: see [returning].
func keyboard() (keys <-chan rune, restore func(), err error) {
	in := int(os.Stdin.Fd())
	if !term.IsTerminal(in) || !isTerminal(os.Stderr) {
		return nil, func() {}, nil
	}
	before, err := term.MakeRaw(in)
	if err != nil {
		return nil, func() {}, err
	}
	out := make(chan rune)
	done := make(chan struct{})
	go func() {
		defer close(out)
		for r := bufio.NewReader(os.Stdin); ; {
			k, _, err := r.ReadRune()
			if err != nil {
				return
			}
			select {
			case out <- k:
			case <-done:
				return
			}
		}
	}()
	return out, sync.OnceFunc(func() { close(done); _ = term.Restore(in, before) }), nil
}

// returning writes to a terminal in raw mode: every line feed gets its carriage
// return.
type returning struct{ w io.Writer }

func (r returning) Write(p []byte) (int, error) {
	if _, err := r.w.Write(bytes.ReplaceAll(p, []byte("\n"), []byte("\r\n"))); err != nil {
		return 0, err
	}
	return len(p), nil
}

// terminalSize is the size of the terminal behind stderr, 80 by 24 where it does
// not say.
func terminalSize() (width, height int) {
	w, h, err := term.GetSize(int(os.Stderr.Fd()))
	if err != nil || w < 1 || h < 1 {
		return 80, 24
	}
	return w, h
}
