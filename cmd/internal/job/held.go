package job

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
)

// errHeld says that another program leads the session.
var errHeld = errors.New("session is led by another program")

// holding is the sign, for other programs, that this one leads a session: a file
// beside the store that is locked as long as the program lives, however it ends. It
// tells a sweep that is being measured from one that a crash cut short.
type holding struct {
	f    *os.File
	path string
}

// heldMark stands between the names of store and session.
const heldMark = "-session-"

// tidy removes what programs that were killed between two sweeps left of their signs.
func tidy(store string) {
	paths, _ := filepath.Glob(globEscape.Replace(store) + heldMark + "*")
	for _, path := range paths {
		if h, err := hold(store, strings.TrimPrefix(path, store+heldMark)); err == nil {
			h.release()
		}
	}
}

var globEscape = strings.NewReplacer(`[`, `[[]`, `*`, `[*]`, `?`, `[?]`)

// hold takes a session; [errHeld] when another program has it. Where the file cannot
// be made, or the system knows no locks, it is led without.
func hold(store, session string) (*holding, error) {
	path := store + heldMark + session
	f, err := openAlone(path)
	if errors.Is(err, errHeld) {
		return nil, fmt.Errorf("session %s: %w", session, err)
	}
	return &holding{f, path}, nil
}

// release gives the session back.
func (h *holding) release() {
	if h == nil || h.f == nil {
		return
	}
	removeOpen(h.f, h.path)
}
