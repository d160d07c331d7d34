package fit

var unmetCells []struct {
	why   string
	cells map[string]string
}
