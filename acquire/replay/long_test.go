package replay

import "os"

// long runs the simulations that take their time.
var long = os.Getenv("GATESILL_LONG") != ""
