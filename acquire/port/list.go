package port

// Found is one device that an instrument may hang on.
type Found struct {
	Address string   // what to open: the most lasting name
	Device  string   // what the name stands for now
	Other   []string // other names for it
	Kind    string   // "serial" or "usbtmc"
	Group   string   // of the device; "" not known
	Access  string   // "" if this user may open it, else why not and what helps
	Shared  bool     // another device here says it is the same one, so that Address names the socket it is plugged into
}

// List finds the serial adapters and USBTMC devices that are plugged in, by their
// names alone: it opens none. Serial ports of the computer itself are not listed,
// because whether there is anything behind their names shows only in opening them.
func List() ([]Found, error) { return list("/") }
