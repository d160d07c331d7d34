package port

import (
	_ "go.bug.st/serial" // serial lines
)
