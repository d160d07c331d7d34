package table

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"runtime"
	"strings"
	"testing"
)

// longFile is a file of a million rows and about 29 bytes a row: 5,000 devices
// of 200 points, invented, seed 1.
func longFile(rows, points int) []byte {
	rng := rand.New(rand.NewPCG(1, 1))
	var b bytes.Buffer
	b.WriteString("device,vg_V,id_A,vl_V\n")
	for d := 0; d*points < rows; d++ {
		vt := 3 + 0.1*rng.NormFloat64()
		for i := range points {
			vg := 2 + float64(i)*0.01 + 0.0005*rng.NormFloat64()
			id := 1e-6 + 1.9*max(0, vg-vt)*max(0, vg-vt)
			fmt.Fprintf(&b, "D%04d,%.4f,%.6f,%.4f\n", d, vg, id, id*10)
		}
	}
	return b.Bytes()
}

func BenchmarkReadLong(b *testing.B) {
	const rows = 1_000_000
	data := longFile(rows, 200)
	b.SetBytes(int64(len(data)))
	b.ReportAllocs()
	var before, after runtime.MemStats
	for b.Loop() {
		runtime.ReadMemStats(&before)
		f, err := Read("long.csv", bytes.NewReader(data), Options{})
		if err != nil {
			b.Fatal(err)
		}
		runtime.ReadMemStats(&after)
		if f.Points != rows {
			b.Fatalf("%d points", f.Points)
		}
	}
	b.ReportMetric(float64(rows)*float64(b.N)/b.Elapsed().Seconds(), "rows/s")
	b.ReportMetric(float64(after.TotalAlloc-before.TotalAlloc)/1e6, "MB/op")
}

func BenchmarkReadWide(b *testing.B) {
	var s strings.Builder
	s.WriteString("Vg (V)")
	for d := range 5000 {
		fmt.Fprintf(&s, ",D%04d (mA)", d)
	}
	for i := range 100 {
		fmt.Fprintf(&s, "\n%.2f", 2+float64(i)*0.02)
		for d := range 5000 {
			fmt.Fprintf(&s, ",%.3f", float64(i*i)*0.01+float64(d)*0.001)
		}
	}
	b.SetBytes(int64(s.Len()))
	for b.Loop() {
		if _, err := Read("wide.csv", strings.NewReader(s.String()), Options{}); err != nil {
			b.Fatal(err)
		}
	}
}
