package lot

import (
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"sync"
	"testing"
)

// The table of splittable.go is made here, by simulation, as the others are in
// simulate_test.go:
//
//	GATESILL_LONG=write go test ./fit/lot -run TestLongSplitTable -timeout 2h

// splitSizes are the sizes of the table.
var splitSizes = []int{8, 9, 10, 11, 12, 13, 14, 15, 16, 17, 18, 19, 20, 22, 24, 27, 30, 34, 38, 42, 47, 53, 60, 70, 80, 90, 99,
	100, 115, 130, 150, 200, 300, 500, 1000, 2000, 5000, 20_000}

func splitRuns(n int) int { return max(6_000, min(400_000, 12_000_000/n)) }

// oneKinds are the lots of one population that the bar holds for.
var oneKinds = []struct {
	name  string
	level float64
	draw  func(*rand.Rand) float64
}{
	{"normal", splitLevel, normal},
	{"even", splitOther, (*rand.Rand).Float64},
	{"t5", splitOther, t5},
}

// splitScores gives the scores of lots of one kind, ascending.
func splitScores(n, runs int, seed uint64, draw func(*rand.Rand) float64) []float64 {
	rng := rand.New(rand.NewPCG(uint64(n), seed))
	scores, x := make([]float64, runs), make([]float64, n)
	for r := range scores {
		for i := range x {
			x[i] = draw(rng)
		}
		slices.Sort(x)
		scores[r] = partingOf(x, 0, 0).score
	}
	slices.Sort(scores)
	return scores
}

// splitRow works out one row: of all kinds of lots the highest score.
func splitRow(n, runs int) sizeRow {
	row := sizeRow{n: n}
	for q := range row.values {
		row.values[q] = leastScore
	}
	for k, kind := range oneKinds {
		scores := splitScores(n, runs, 20260301+uint64(k), kind.draw)
		for i, q := range fewQuantities {
			row.values[i] = math.Max(row.values[i], scores[int(float64(runs)*(1-kind.level/float64(q)))])
		}
	}
	return row
}

func splitFile(rows []sizeRow) string {
	return "// Made by TestLongSplitTable with GATESILL_LONG=write; do not edit.\n\npackage lot\n" +
		goRows("splitTable", "// splitTable holds the bar of the parting: number of devices, and for 1 to 6\n"+
			"// quantities the score that 0.4 % of normal lots and 0.8 % of lots spread evenly or\n// with the tails of t5 exceed at most.", rows)
}

func TestLongSplitTable(t *testing.T) {
	mode := long(t)
	rows := make([]sizeRow, len(splitSizes))
	var wg sync.WaitGroup
	next := make(chan int)
	for range 2 {
		wg.Go(func() {
			for i := range next {
				rows[i] = splitRow(splitSizes[i], splitRuns(splitSizes[i]))
			}
		})
	}
	for i := len(splitSizes) - 1; i >= 0; i-- {
		next <- i
	}
	close(next)
	wg.Wait()
	text := splitFile(rows)
	if mode == "write" {
		if err := os.WriteFile("splittable.go", []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	have, err := os.ReadFile("splittable.go")
	if err != nil {
		t.Fatal(err)
	}
	if string(have) != text {
		t.Errorf("splittable.go differs from a fresh simulation:\n%s", text)
	}
}
