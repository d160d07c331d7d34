package bench

import (
	"gatesill/acquire/meter"
	"gatesill/acquire/port"
)

// formats are the ways in which meters speak.
var formats = []meter.Format{
	{Name: "fs9721", Length: 14, Settings: "2400 8N1"}, {Name: "scpi", Ask: "READ?", Settings: "9600 8N1"}, {Name: "text"},
}

// findFormat finds a way of speaking by its name.
func findFormat(name string) (meter.Format, bool) {
	for _, f := range formats {
		if f.Name == name {
			return f, true
		}
	}
	return meter.Format{}, false
}

func formatNames() []string {
	var names []string
	for _, f := range formats {
		names = append(names, f.Name)
	}
	return names
}

// needsAsk tells whether a format says nothing by itself and nothing is known to ask it with.
func needsAsk(f meter.Format) bool { return false }

// settings checks the settings of a serial line.
func (p *parser) settings(key, text string) {
	if text == "" {
		return
	}
	if _, err := port.ParseSettings(text); err != nil {
		p.fail(key, "%w", err)
	}
}
