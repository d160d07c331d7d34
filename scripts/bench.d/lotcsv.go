//go:build ignore

// Lotcsv writes a big long-layout CSV to standard output: device, gate voltage,
// drain current. The devices are invented: a square law with a threshold of its
// own each, read by 4.5-digit meters (20,000 counts) with a little noise. The
// same arguments give the same bytes.
//
//	go run scripts/bench.d/lotcsv.go -devices 2000 -rows 500 > lot.csv
package main

import (
	"bufio"
	"flag"
	"fmt"
	"math"
	"math/rand"
	"os"
	"strconv"
)

// ranges of a 20,000-count current meter: greatest reading in A, decimals shown.
var ranges = []struct {
	top      float64
	decimals int
}{{1.9999e-3, 7}, {19.999e-3, 6}, {199.99e-3, 5}, {1.9999, 4}, {19.999, 3}}

func main() {
	devices := flag.Int("devices", 2000, "number of devices")
	rows := flag.Int("rows", 500, "rows of each device")
	step := flag.Float64("step", 0.004, "gate step in V")
	seed := flag.Int64("seed", 20240501, "seed of what is drawn")
	flag.Parse()
	if err := write(*devices, *rows, *step, *seed); err != nil {
		fmt.Fprintln(os.Stderr, "lotcsv:", err)
		os.Exit(1)
	}
}

func write(devices, rows int, step float64, seed int64) error {
	w := bufio.NewWriterSize(os.Stdout, 1<<20)
	rnd := rand.New(rand.NewSource(seed))
	w.WriteString("device,vg_V,id_A\n")
	line := make([]byte, 0, 64)
	for d := 1; d <= devices; d++ {
		vt := 3 + 0.08*rnd.NormFloat64()         // V
		beta := 2 * (1 + 0.03*rnd.NormFloat64()) // A/V^2
		for r := 0; r < rows; r++ {
			vg := 2.5 + step*float64(r) // V
			id := beta / 2 * math.Pow(math.Max(vg-vt, 0), 2)
			id += id*3e-4*rnd.NormFloat64() + 2e-7*rnd.Float64()
			vg += 3e-4 * rnd.NormFloat64()
			line = fmt.Appendf(line[:0], "D%04d,", d)
			line = strconv.AppendFloat(line, vg, 'f', 3, 64)
			line = append(line, ',')
			line = strconv.AppendFloat(line, id, 'f', decimals(id), 64)
			line = append(line, '\n')
			w.Write(line)
		}
	}
	return w.Flush() // reports the first failed write too
}

func decimals(id float64) int {
	for _, r := range ranges {
		if id <= r.top {
			return r.decimals
		}
	}
	return ranges[len(ranges)-1].decimals
}
