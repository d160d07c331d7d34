package match

import (
	"math"
	"math/rand/v2"
	"testing"
	"time"
)

// TestCases: the search by cases, started without any answer, finds the greatest
// number of sets and the least total of each number; and whatever the duals are, the
// bounds made of them hold.
func TestCases(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 2026))
	closed, useful := 0, 0
	const cases = 60
	for c := range cases {
		k := 3 + c%2
		by := twoQuantities()
		by[0].Within = []float64{0.04, 0.08}[c/2%2]
		p, err := newProblem(small(rng, 8+rng.IntN(5), 0), Options{Size: k, By: by, Aim: Most})
		if err != nil {
			t.Fatal(err)
		}
		b := brute(p)
		most := len(b.total) - 1
		for most > 0 && b.total[most] < 0 {
			most--
		}
		g := p.newGroups(t.Context(), time.Now().Add(time.Hour))
		cols := g.all(mostColumns, g.late)
		if most == 0 {
			if len(cols) > 0 {
				t.Errorf("case %d: %d sets where there are none", c, len(cols))
			}
			continue
		}

		master := func(z int, upTo bool) *master {
			m := newMaster(g, z, 4*nano)
			if m.upTo = upTo; upTo {
				m.spare, m.big = true, 0
			}
			for _, col := range cols {
				m.add(col)
				if upTo {
					m.cost[len(m.cost)-1] = -setValue
				}
			}
			return m
		}
		number := &tree{g: g, over: g.late}
		number.search(master(g.most(), true))
		if number.best > most || !number.ended && number.best != most {
			t.Errorf("case %d: %d sets by cases, there are %d", c, number.best, most)
		}
		for z := 1; z <= most; z++ {
			total := &tree{g: g, over: g.late, sum: true, least: math.MaxInt64 / 4}
			total.search(master(z, false))
			if total.least < b.total[z] || !total.ended && total.least != b.total[z] {
				t.Errorf("case %d, %d sets of %d: total %d by cases, want %d", c, z, k, total.least, b.total[z])
			}
			if !total.ended && !number.ended {
				closed++
			}
			m := master(z, false)
			m.solve(g.late)
			for range 20 {
				if low := m.floor(); low > b.total[z] {
					t.Errorf("case %d, %d sets: duals prove %d, the best total is %d", c, z, low, b.total[z])
				} else if 2*low > b.total[z] {
					useful++
				}
				for i := range m.pi {
					m.pi[i] += 0.03 * rng.NormFloat64() * math.Abs(m.pi[i])
				}
			}
		}
		m := master(g.most(), true)
		m.solve(g.late)
		for range 20 {
			if n := m.ceiling(); n < most {
				t.Errorf("case %d: duals allow %d sets, there are %d", c, n, most)
			}
			for i := range m.pi {
				m.pi[i] *= 1 + 0.2*rng.NormFloat64()
			}
		}
	}
	if closed < cases/2 || useful < cases {
		t.Errorf("%d searches were closed, %d bounds above half the best: the test says little", closed, useful)
	}
}
