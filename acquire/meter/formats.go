package meter

import (
	"fmt"
	"strings"
)

// Formats are the ways of speaking that can be read, in the order of the help.
var Formats = []Format{
	{Name: "fs9721", Text: "one-way, 14 bytes: segments of the display", Settings: "2400 8N1", Bits: 8, Length: 14, New: newFS9721},
	{Name: "fs9922", Text: "one-way, 14 bytes: digits and status bits", Settings: "2400 8N1", Bits: 8, Length: 14, New: newFS9922},
	{Name: "es51922", Text: "one-way, 14 bytes: 22000 counts", Settings: "19230 7O1", Bits: 7, Length: 14, New: newES51922},
	{Name: "es519xx-4000", Text: "one-way, 11 bytes, each sent twice: 4000 counts", Settings: "2400 7O1", Bits: 7, Length: 11, Twice: true, New: newES4000},
	{Name: "polled-ascii", Text: "asked with D, 14 characters", Settings: "1200 7N2", Bits: 7, Ask: "D", Length: 14, New: newPolled},
	{Name: "stx", Text: "16 bytes from STX to CR, one-way or asked", Settings: "9600 8N1", Bits: 8, Length: 16, New: newSTX},
	{Name: "scpi", Text: "replies of SCPI instruments, one or several numbers", Bits: 8, Ask: "READ?", Lines: true, New: newSCPI},
	{Name: "text", Text: "lines of one or several numbers, as microcontrollers print", Bits: 8, Lines: true, New: newText},
}

// Find gives the format of that name.
func Find(name string) (Format, bool) {
	for _, f := range Formats {
		if f.Name == name {
			return f, true
		}
	}
	return Format{}, false
}

// Names lists the formats for an error or a flag: "fs9721, fs9922, ...".
func Names() string {
	names := make([]string, len(Formats))
	for i, f := range Formats {
		names[i] = f.Name
	}
	return strings.Join(names, ", ")
}

// Help lists the formats for people, one a line.
func Help() string {
	var b strings.Builder
	for _, f := range Formats {
		settings := f.Settings
		if settings == "" {
			settings = "any"
		}
		fmt.Fprintf(&b, "%-13s %-10s %s\n", f.Name, settings, f.Text)
	}
	return b.String()
}
