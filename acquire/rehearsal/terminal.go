package rehearsal

import (
	"os"
)

// terminal is a pseudo-terminal; the program under rehearsal opens its path as it
// would open a serial line. Its own settings are raw from the start.
type terminal struct {
	f    *os.File
	path string
}

func (t *terminal) close() error { return t.f.Close() }
