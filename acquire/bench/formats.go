package bench

import (
	"gatesill/acquire/keeper"
	"gatesill/acquire/meter"
	"gatesill/acquire/port"
)

// findFormat finds a way in which meters speak by its name.
func findFormat(name string) (meter.Format, bool) { return meter.Find(name) }

func formatNames() []string {
	var names []string
	for _, f := range meter.Formats {
		names = append(names, f.Name)
	}
	return names
}

// commandNames are the commands that a supply's templates may replace.
func commandNames() []string { return keeper.Names() }

// settings checks the settings of a serial line.
func (p *parser) settings(key, text string) {
	if text == "" {
		return
	}
	if _, err := port.ParseSettings(text); err != nil {
		p.fail(key, "%w", err)
	}
}
