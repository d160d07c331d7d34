package blossom

import (
	"context"
	"fmt"
	"os"
	"strings"
	"testing"
	"time"
)

// TestTotalOfPoints matches the points of the file that GATESILL_POINTS names, two
// whole numbers a line, by the greater of both differences, and tells the total:
// scripts/bench holds it against that of another program.
func TestTotalOfPoints(t *testing.T) {
	name := os.Getenv("GATESILL_POINTS")
	if name == "" {
		t.Skip("GATESILL_POINTS names no file")
	}
	b, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	var at [][]float64
	var x, y []int64
	for _, line := range strings.Fields(string(b)) {
		var u, v int64
		if _, err := fmt.Sscanf(line, "%d,%d", &u, &v); err != nil {
			t.Fatalf("%s: %q: %v", name, line, err)
		}
		at, x, y = append(at, []float64{float64(u), float64(v)}), append(x, u), append(y, v)
	}
	away := func(a, b int64) int64 { return max(a-b, b-a) }
	c := Cloud{At: at, Norm: Greatest, Scale: 1, Distance: func(i, j int) int64 { return max(away(x[i], x[j]), away(y[i], y[j])) }}
	start := time.Now()
	r, err := c.Match(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	took := time.Since(start)
	t.Logf("total %d in %.2f ms", r.Total, took.Seconds()*1e3)
}
