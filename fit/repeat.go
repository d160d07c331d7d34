package fit

import (
	"math"
	"slices"

	"gatesill/fit/stats"
)

// NotBelow makes the random uncertainty of q at least floor, and the other two
// greater by the same variance: what a device reads differently by when it is put
// in again is in no accuracy statement and in no curve of a single insertion. An
// uncertainty within the session that is not known becomes the floor; the other two
// stay not known. nu is the degrees of freedom of the floor, for the budget.
//
// Checked: TestNotBelow.
func (q *Quantity) NotBelow(floor, nu float64) {
	if !q.Ok() || !(floor > 0) || q.U >= floor {
		return
	}
	own := q.U
	if math.IsNaN(own) {
		own = 0
	}
	more := math.Sqrt(floor*floor - own*own)
	q.U, q.UBetween, q.UAbsolute = floor, rss(q.UBetween, more), rss(q.UAbsolute, more)
	if q.Budget == nil {
		return
	}
	at := slices.IndexFunc(q.Budget.Lines, func(c Contribution) bool { return c.Input > InRepeat })
	if at < 0 {
		at = len(q.Budget.Lines)
	}
	info := inputInfos[InRepeat]
	line := Contribution{Input: InRepeat, Name: info.name, U: more, Unit: info.unit, C: 1, Type: info.kind, Shape: info.shape, Nu: nu, Basis: "repeatability"}
	q.Budget = &Budget{Lines: slices.Insert(slices.Clone(q.Budget.Lines), at, line)}
}

// Repeated takes into account that a device put in again reads differently by the
// standard deviation sigma, known from many devices with nu degrees of freedom: r
// is the result over all sweeps of a device, ins its quantity k of every insertion
// apart.
//
// Where sweeps disagree by their own uncertainties only, and not by more than
// three standard deviations of a difference between two insertions (of across, which
// holds besides sigma what operators and fixtures differ by; corrected for the number
// of pairs), the value is the plain mean of the insertions and the
// warning sweeps-disagree goes. The random uncertainty is not below sigma/√n of n
// insertions, or sigma where the value is that of a single one.
//
// Changes r in quantity k only. Checked: TestRepeated.
func Repeated(r *Result, k Key, ins []Quantity, sigma, across, nu float64) {
	q := r.At(k)
	if q == nil || !q.Ok() || !(sigma > 0) {
		return
	}
	var values []Quantity
	for _, x := range ins {
		if x.Ok() {
			values = append(values, x)
		}
	}
	n := len(values)
	disagree := slices.ContainsFunc(r.Warnings, func(w Warning) bool { return saysDisagreement(w, k) })
	if disagree && n > 1 {
		low, high, sum := math.Inf(1), math.Inf(-1), 0.0
		for _, x := range values {
			low, high, sum = math.Min(low, x.Value), math.Max(high, x.Value), sum+x.Value
		}
		pairs := float64(n*(n-1)) / 2
		most := stats.NormalQuantile(1-stats.NormalUpper(sweepsApart)/pairs) * math.Sqrt2 * math.Max(sigma, across)
		if high-low <= most {
			disagree = false
			first := values[0]
			first.Value = sum / float64(n)
			for _, x := range values[1:] {
				first.N += x.N
			}
			*q = first
			r.Warnings = slices.DeleteFunc(slices.Clone(r.Warnings), func(w Warning) bool { return saysDisagreement(w, k) })
		}
	}
	if disagree || n < 1 {
		n = 1
	}
	q.NotBelow(sigma/math.Sqrt(float64(n)), nu)
}
