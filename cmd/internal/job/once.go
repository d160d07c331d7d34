package job

import (
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"
)

// bytes reads what can be read only once, stdin or a named pipe; for a file it
// returns nil.
func (im *importer) bytes(ctx context.Context, name string) ([]byte, string, error) {
	var src io.Reader
	display := filepath.Base(name)
	if name == "-" {
		if im.rq.Stdin == nil {
			return nil, stdinName, Usage("", "stdin can be read only once")
		}
		src, display = im.rq.Stdin, stdinName
	} else if st, err := os.Stat(name); err == nil && st.Mode()&os.ModeNamedPipe != 0 {
		src = &pipe{name: name}
	} else {
		return nil, display, nil
	}
	const limit = 1 << 30
	b, err := readAll(ctx, io.LimitReader(src, limit+1))
	if err != nil {
		return nil, display, fmt.Errorf("%s: %w", display, err)
	}
	if len(b) > limit {
		return nil, display, failed("split it", "%s: more than 1 GiB", display)
	}
	if b == nil {
		b = []byte{}
	}
	return b, display, nil
}

// pipe opens a named pipe at its first read: opening waits for a writer.
type pipe struct {
	name string
	f    *os.File
}

func (p *pipe) Read(b []byte) (int, error) {
	if p.f == nil {
		f, err := os.Open(p.name)
		if err != nil {
			return 0, err
		}
		p.f = f
	}
	n, err := p.f.Read(b)
	if err != nil {
		p.f.Close()
	}
	return n, err
}

// readAll is io.ReadAll that gives up when the job is interrupted: nobody can
// wake a read of a terminal or a pipe.
func readAll(ctx context.Context, r io.Reader) ([]byte, error) {
	type outcome struct {
		b   []byte
		err error
	}
	done := make(chan outcome, 1)
	go func() {
		b, err := io.ReadAll(r)
		done <- outcome{b, err}
	}()
	select {
	case <-ctx.Done():
		return nil, ctx.Err()
	case o := <-done:
		return o.b, o.err
	}
}
