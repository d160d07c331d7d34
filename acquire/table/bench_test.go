//go:build unix

package table

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"
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

// BenchmarkReadLong reports, beside rows per second, the processor time of one
// file, which other work on the machine disturbs least.
func BenchmarkReadLong(b *testing.B) {
	const rows = 1_000_000
	path := filepath.Join(b.TempDir(), "long.csv")
	data := longFile(rows, 200)
	if err := os.WriteFile(path, data, 0o600); err != nil {
		b.Fatal(err)
	}
	b.SetBytes(int64(len(data)))
	data = nil
	b.ReportAllocs()
	var busy time.Duration
	for b.Loop() {
		start := processorTime()
		f, err := ReadFile(path, Options{})
		if err != nil {
			b.Fatal(err)
		}
		busy += processorTime() - start
		if f.Points != rows {
			b.Fatalf("%d points", f.Points)
		}
	}
	b.ReportMetric(float64(rows)*float64(b.N)/b.Elapsed().Seconds(), "rows/s")
	b.ReportMetric(busy.Seconds()*1000/float64(b.N), "cpu-ms/op")
}

// processorTime is what the process has used so far, user and system.
func processorTime() time.Duration {
	var u syscall.Rusage
	if syscall.Getrusage(syscall.RUSAGE_SELF, &u) != nil {
		return 0
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
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

// A lot of many small files, one a device, costs what a small file costs.
func BenchmarkReadSmall(b *testing.B) {
	text := "# V_DD = 12 V\n# R_L = 10 Ohm\nVg (V),Id (mA)\n"
	for i := range 100 {
		text += fmt.Sprintf("%.2f,%.3f\n", 2+float64(i)*0.02, float64(i*i)*0.01)
	}
	path := filepath.Join(b.TempDir(), "D07.csv")
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := ReadFile(path, Options{}); err != nil {
			b.Fatal(err)
		}
	}
}
