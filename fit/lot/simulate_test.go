package lot

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"sync"
	"testing"

	"gatesill/fit/stats"
)

// The tables of tables.go are made here, by simulation:
//
//	GATESILL_LONG=1 go test ./fit/lot -run TestLong -v -timeout 2h       checks them
//	GATESILL_LONG=write go test ./fit/lot -run TestLongTables -timeout 2h  makes them again
//
// The seeds are fixed, so making them again on any machine gives the same file.

// long skips a test that takes minutes, unless it is asked for.
func long(t *testing.T) string {
	t.Helper()
	v := os.Getenv("GATESILL_LONG")
	if v == "" {
		t.Skip("takes minutes; set GATESILL_LONG=1 to run it")
	}
	return v
}

// sizes of the tables: every one while odd and even ones differ, then sparser.
var sizes = []int{8, 9, 10, 11, 12, 13, 14, 15, 16, 17, 18, 19, 20, 21, 22, 23, 24, 27, 28, 32, 33, 38, 39,
	45, 46, 53, 54, 60, 80, 100, 150, 200, 300, 500, 1000, 2000, 5000, 20000}

func runsFor(n int) int {
	return max(20_000, min(1_000_000, 60_000_000/n))
}

// cleanLots simulates one quantity of normal lots of n devices.
type cleanLots struct {
	score    []float64 // of the parting, by lot
	farthest []float64 // robust spreads from the median to the farthest device
	esd      map[int][]bool
}

// numbers of quantities of the columns of the tables.
var (
	fewQuantities   = []int{1, 2, 3, 4, 5, 6}
	curveQuantities = []int{2, 4, 8, 16, 32, 64}
)

func simulateClean(n, runs int, draw func(*rand.Rand) float64) cleanLots {
	c := cleanLots{score: make([]float64, runs), farthest: make([]float64, runs), esd: map[int][]bool{}}
	columns := slices.Concat(fewQuantities, curveQuantities)
	slices.Sort(columns)
	columns = slices.Compact(columns)
	for _, q := range columns {
		c.esd[q] = make([]bool, runs)
	}
	rng := rand.New(rand.NewPCG(uint64(n), 20240229))
	x := make([]float64, n)
	for r := range runs {
		for i := range x {
			x[i] = draw(rng)
		}
		slices.Sort(x)
		c.score[r] = partingOf(x, 0, 0).score
		b := center(&column{sorted: x, least: 1e-12})
		c.farthest[r] = math.Max(b.mid-x[0], x[n-1]-b.mid) / b.sd
		for _, q := range columns {
			lo, hi := stats.ESDInner(x, esdLevel/float64(q), n/4)
			if hi-lo == n {
				break // nor at a stricter level
			}
			c.esd[q][r] = true
		}
	}
	return c
}

func normal(rng *rand.Rand) float64 { return rng.NormFloat64() }

// t5 has tails about as heavy as lots of real parts may have.
func t5(rng *rand.Rand) float64 {
	var s float64
	for range 5 {
		z := rng.NormFloat64()
		s += z * z
	}
	return rng.NormFloat64() / math.Sqrt(s/5)
}

// leastScore keeps the parting from being asked for next to no evidence in large
// lots, where the conditions of shape alone hold the level.
const leastScore = 4

// tableRows works out one row of each table of limits. The parting takes its share
// here with a bar at the level of normal lots; the bar of splittable.go is never
// lower, so that these limits err on the side of fewer flags.
func tableRows(n, runs int) (limit, curve sizeRow) {
	c := simulateClean(n, runs, normal)
	limit.n, curve.n = n, n
	scores := slices.Clone(c.score)
	slices.Sort(scores)
	for i, q := range fewQuantities {
		limit.values[i] = c.limit(q, math.Max(leastScore, scores[int(float64(runs)*(1-splitLevel/float64(q)))]))
	}
	for i, q := range curveQuantities {
		curve.values[i] = c.limit(q, math.Inf(1))
		if math.IsNaN(curve.values[i]) {
			// Too few lots to tell: on as the normal distribution goes.
			reach := func(q int) float64 { return math.Erfinv(1 - totalLevel/float64(n*q)) }
			curve.values[i] = curve.values[i-1] * reach(q) / reach(curveQuantities[i-1])
		}
	}
	return limit, curve
}

// limit is the limit that uses up what parting and ESD test leave of the level of
// one of q quantities, NaN where fewer than 20 lots decide it.
func (c *cleanLots) limit(q int, critical float64) float64 {
	left := float64(len(c.score)) * (1 - math.Pow(1-totalLevel, 1/float64(q)))
	var rest []float64
	for r := range c.score {
		if c.score[r] > critical || c.esd[q][r] {
			left--
		} else {
			rest = append(rest, c.farthest[r])
		}
	}
	if left < 20 {
		return math.NaN()
	}
	slices.Sort(rest)
	return rest[len(rest)-int(left)]
}

func allTables() (limit, curve []sizeRow) {
	limit, curve = make([]sizeRow, len(sizes)), make([]sizeRow, len(sizes))
	var wg sync.WaitGroup
	next := make(chan int)
	for range 2 {
		wg.Go(func() {
			for i := range next {
				limit[i], curve[i] = tableRows(sizes[i], runsFor(sizes[i]))
			}
		})
	}
	for i := len(sizes) - 1; i >= 0; i-- {
		next <- i
	}
	close(next)
	wg.Wait()
	return limit, curve
}

func goRows(name, doc string, rows []sizeRow) string {
	var b strings.Builder
	fmt.Fprintf(&b, "\n%s\nvar %s = []sizeRow{\n", doc, name)
	for _, r := range rows {
		fmt.Fprintf(&b, "\t{%d, [mostQuantities]float64{", r.n)
		for q, v := range r.values {
			if q > 0 {
				b.WriteString(", ")
			}
			fmt.Fprintf(&b, "%.2f", v)
		}
		b.WriteString("}},\n")
	}
	b.WriteString("}\n")
	return b.String()
}

// tablesFile is tables.go with these rows.
func tablesFile(limit, curve []sizeRow) string {
	return "// Made by TestLongTables with GATESILL_LONG=write; do not edit.\n\npackage lot\n" +
		goRows("limitTable", "// limitTable holds default limits in robust spreads: number of devices, and for 1 to\n// 6 quantities the limit with which 1.9 % of normal lots get any false alarm.", limit) +
		goRows("curveTable", "// curveTable holds the same for 2, 4, 8, 16, 32 and 64 quantities by which lots are\n// not parted.", curve)
}

func TestLongTables(t *testing.T) {
	mode := long(t)
	text := tablesFile(allTables())
	if mode == "write" {
		if err := os.WriteFile("tables.go", []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	have, err := os.ReadFile("tables.go")
	if err != nil {
		t.Fatal(err)
	}
	if string(have) != text {
		t.Errorf("tables.go differs from a fresh simulation:\n%s", text)
	}
}

// The file of tables is laid out as it is made, and one size of it is found again
// from a few lots.
func TestTablesAreMade(t *testing.T) {
	have, err := os.ReadFile("tables.go")
	if err != nil {
		t.Fatal(err)
	}
	if string(have) != tablesFile(limitTable, curveTable) {
		t.Error("tables.go is not laid out as TestLongTables does")
	}
	limit, curve := tableRows(10, 40_000) // 1,000,000 lots in the file
	for _, c := range []struct {
		name  string
		row   sizeRow
		table []sizeRow
		tol   float64
	}{{"score", splitRow(10, 40_000), splitTable, 0.05}, {"limit", limit, limitTable, 0.05}, {"limit of curves", curve, curveTable, 0.10}} {
		for column := range 4 { // beyond, a handful of lots decide
			got, want := c.row.values[column], lookup(c.table, 10, float64(column))
			if math.Abs(got/want-1) > c.tol {
				t.Errorf("%s of ten devices, column %d: %.2f, file %.2f", c.name, column, got, want)
			}
		}
	}
}
