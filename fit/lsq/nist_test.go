package lsq

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// strd is one file of testdata/published/strd: NIST Statistical Reference
// Datasets, public domain. The certified figures have 11 digits (nonlinear) or
// 15 (linear).
type strd struct {
	Transform string `json:"response_transform"`
	Intercept bool
	Data      map[string][]float64
	Starts    map[string][]float64
	Expected  struct {
		Indices []int     `json:"parameter_indices"`
		P       []float64 `json:"parameters"`
		SD      []float64 `json:"standard_deviations"`
		RSS     float64   `json:"residual_sum_of_squares"`
		RSD     float64   `json:"residual_standard_deviation"`
	}
}

func loadStrd(t testing.TB, name string) strd {
	t.Helper()
	b, err := os.ReadFile(filepath.Join("..", "..", "testdata", "published", "strd", name+".json"))
	if err != nil {
		t.Fatal(err)
	}
	var d strd
	if err := json.Unmarshal(b, &d); err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	return d
}

// regressors are x, or x1, x2 ...
func (d *strd) regressors() [][]float64 {
	if x, ok := d.Data["x"]; ok {
		return [][]float64{x}
	}
	var xs [][]float64
	for _, k := range []string{"x1", "x2", "x3", "x4", "x5", "x6"} {
		if x, ok := d.Data[k]; ok {
			xs = append(xs, x)
		}
	}
	return xs
}

// problem is the regression with function f, unweighted.
func (d *strd) problem(f nistModel) Problem {
	x, y := d.regressors(), slices.Clone(d.Data["y"])
	if strings.Contains(d.Transform, "log") {
		for i := range y {
			y[i] = math.Log(y[i])
		}
	}
	m, n := len(y), len(d.Expected.P)
	g := make([]float64, n)
	return Problem{M: m, N: n, Eval: func(p, r, jac []float64) bool {
		for i := range m {
			r[i] = f(p, x, i, g) - y[i]
			if jac == nil {
				continue
			}
			for j, v := range g {
				jac[j*m+i] = v
			}
		}
		return true
	}}
}

// digits is the number of right digits of got, the negative logarithm of the
// relative error (of the absolute one where want is zero), at most most.
func digits(got, want, most float64) float64 {
	e := math.Abs(got - want)
	if want != 0 {
		e /= math.Abs(want)
	}
	d := -math.Log10(e)
	if math.IsNaN(d) {
		return math.Inf(-1)
	}
	return math.Min(d, most)
}

func nistNames() []string {
	var names []string
	for n := range nistModels {
		names = append(names, n)
	}
	slices.Sort(names)
	return names
}

// fewest is the number of right digits of the worst of some figures.
func fewest(got, want []float64, most float64) float64 {
	d := most
	for j := range want {
		d = math.Min(d, digits(got[j], want[j], most))
	}
	return d
}

// errors are the standard errors of all parameters.
func (f *Fit) errors(scaled bool) []float64 {
	se := make([]float64, f.N)
	for j := range se {
		se[j] = f.SE(j, scaled)
	}
	return se
}

// Certified values: NIST StRD, Nonlinear Regression, 11 digits. From the nearer
// start all 27 must give 6 digits of every parameter, every standard deviation,
// the residual sum of squares and the residual standard deviation; from the
// farther start at least 25 of them; and no fit may claim a minimum with fewer
// than 4 digits from either.
//
// Lanczos1: its residuals (3e-13 in all, of readings of size 5) lie so near the
// rounding of float64 that neither the residual sum of squares nor what is scaled
// by it can have 6 digits. There the standard deviations are asked for 6 digits
// before the scaling, and after it to within what the rounding of the readings
// leaves open.
func TestNISTNonlinear(t *testing.T) {
	const want, most = 6.0, 11.0
	var s Solver
	good, calls := map[string]int{}, 0
	for _, name := range nistNames() {
		d := loadStrd(t, "nonlinear_"+name)
		pr := d.problem(nistModels[name])
		for _, start := range []string{"start1", "start2"} {
			f := s.Solve(pr, d.Starts[start], Options{})
			calls += f.Evals
			p := fewest(f.P, d.Expected.P, most)
			sd := fewest(f.errors(true), d.Expected.SD, most)
			rss := digits(f.SSR, d.Expected.RSS, most)
			rsd := digits(math.Sqrt(f.Scale()), d.Expected.RSD, most)
			if name == "lanczos1" {
				sd, rss, rsd = lanczosDigits(t, &d, &f), most, most
			}
			t.Logf("%-9s %s: %-22s %4d calls, %3d steps; digits: parameters %4.1f, sd %4.1f, rss %4.1f, rsd %4.1f",
				name, start, f.Reason, f.Evals, f.Iterations, p, sd, rss, rsd)
			if f.Reason.Converged() && p < 4 {
				t.Errorf("%s from %s: %s with %.1f digits", name, start, f.Reason, p)
			}
			ok := f.Reason.Converged() && p >= want && sd >= want && rss >= want && rsd >= want
			if ok {
				good[start]++
			} else if start == "start2" {
				t.Errorf("%s from %s: %s; digits %.1f %.1f %.1f %.1f, want %g each", name, start, f.Reason, p, sd, rss, rsd, want)
			}
		}
	}
	t.Logf("start1 %d of 27, start2 %d of 27, %d calls in all", good["start1"], good["start2"], calls)
	if good["start1"] < 25 || good["start2"] != 27 {
		t.Errorf("solved %d and %d of 27, want 25 and 27", good["start1"], good["start2"])
	}
}

// lanczosDigits are the digits of the unscaled standard errors of Lanczos1; the
// scaled ones are held to what rounding leaves: each residual is known to some
// 2 eps of its reading, so the root of their sum of squares to 4 eps ‖y‖.
func lanczosDigits(t *testing.T, d *strd, f *Fit) float64 {
	t.Helper()
	norm := math.Sqrt(dot(d.Data["y"], d.Data["y"]))
	worst := 11.0
	for j, want := range d.Expected.SD {
		u := f.SE(j, false)
		worst = math.Min(worst, digits(u, want/d.Expected.RSD, 11))
		room := 4 * epsilon * norm / math.Sqrt(float64(f.DOF())) * u
		if got := f.SE(j, true); !(math.Abs(got-want) <= room) {
			t.Errorf("lanczos1: sd %d %.10g, want %.10g ± %.2g", j+1, got, want, room)
		}
	}
	return worst
}

// With all limits at nothing a fit goes on for as long as rounding lets it: to
// nearly all the digits certified, without wasting calls on a sum of squares that
// no longer tells.
func TestNISTToTheEnd(t *testing.T) {
	var s Solver
	calls := 0
	for _, name := range nistNames() {
		d := loadStrd(t, "nonlinear_"+name)
		f := s.Solve(d.problem(nistModels[name]), d.Starts["start2"], Options{Cosine: 1e-300, RelStep: 1e-300})
		p := fewest(f.P, d.Expected.P, 11)
		t.Logf("%-9s %-22s %4d calls, %4.1f digits", name, f.Reason, f.Evals, p)
		if f.Reason != ByReduction || p < 9.5 {
			t.Errorf("%s: %s, %.1f digits, want 9.5", name, f.Reason, p)
		}
		calls += f.Evals
	}
	t.Logf("%d calls in all", calls)
	if calls > 1500 {
		t.Errorf("%d calls in all, want at most 1500", calls)
	}
}

// TestNISTTrial runs the same with the derivatives at every trial point: the
// same path, with fewer calls.
func TestNISTTrial(t *testing.T) {
	var s Solver
	apart, together, steps := 0, 0, 0
	for _, name := range nistNames() {
		d := loadStrd(t, "nonlinear_"+name)
		pr := d.problem(nistModels[name])
		a := s.Solve(pr, d.Starts["start2"], Options{})
		b := s.Solve(pr, d.Starts["start2"], Options{JacobianWithTrial: true})
		if a.Reason != b.Reason || a.SSR != b.SSR || !slices.Equal(a.P, b.P) || a.Iterations != b.Iterations {
			t.Errorf("%s: %v %.17g %v, with trial %v %.17g %v", name, a.Reason, a.SSR, a.P, b.Reason, b.SSR, b.P)
		}
		apart, together, steps = apart+a.Evals, together+b.Evals, steps+a.Iterations
	}
	t.Logf("start2: %d steps accepted; %d calls apart, %d together", steps, apart, together)
	if together >= apart {
		t.Errorf("%d calls apart, %d together", apart, together)
	}
}

// The derivatives of the test models against central differences.
func TestNISTDerivatives(t *testing.T) {
	for _, name := range nistNames() {
		d := loadStrd(t, "nonlinear_"+name)
		pr := d.problem(nistModels[name])
		p := slices.Clone(d.Starts["start2"])
		r, jac := make([]float64, pr.M), make([]float64, pr.M*pr.N)
		hi, lo := make([]float64, pr.M), make([]float64, pr.M)
		pr.Eval(p, r, jac)
		for j := range p {
			h := 1e-5 * math.Abs(p[j])
			keep := p[j]
			p[j] = keep + h
			pr.Eval(p, hi, nil)
			p[j] = keep - h
			pr.Eval(p, lo, nil)
			p[j] = keep
			col := jac[j*pr.M : (j+1)*pr.M]
			norm := math.Sqrt(dot(col, col))
			for i, v := range col {
				// Differences are good to about h² times the third derivative.
				if diff := (hi[i] - lo[i]) / (2 * h); math.Abs(diff-v) > 1e-6*norm {
					t.Errorf("%s: ∂r%d/∂b%d = %.10g, by differences %.10g", name, i, j+1, v, diff)
				}
			}
		}
	}
}
