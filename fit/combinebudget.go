package fit

import "math"

// widened is q with the random uncertainty raised to u; what else there is stays.
func widened(q Quantity, u float64) Quantity {
	more := u*u - q.U*q.U
	q.UBetween, q.UAbsolute = math.Sqrt(q.UBetween*q.UBetween+more), math.Sqrt(q.UAbsolute*q.UAbsolute+more)
	q.U = u
	if q.Budget != nil {
		q.Budget = q.Budget.withSweeps(u, 1)
	}
	return q
}

// joinBudgets is the budget of the mean of qs with those weights, whose random
// uncertainty is u: scatter of single sweeps is averaged, what is common to them is
// not, and what u holds beyond that is their difference or the display step that they
// share. nil where one has no budget.
func joinBudgets(qs []Quantity, weight func(Quantity) float64, weights, u float64) *Budget {
	out := &Budget{}
	for in := range inputCount {
		var line Contribution
		square, have := 0.0, false
		for _, q := range qs {
			if q.Budget == nil {
				return nil
			}
			wt := weight(q)
			for _, c := range q.Budget.Lines {
				if c.Input != in {
					continue
				}
				if !have {
					line, have = c, true
				}
				line.Nu = math.Max(line.Nu, c.Nu)
				x := wt * c.Share() * c.Share()
				if in.In(Within) {
					x *= wt / weights
				}
				square += x
			}
		}
		if have {
			line.C = math.Copysign(math.Sqrt(square/weights)/line.U, line.C)
			out.Lines = append(out.Lines, line)
		}
	}
	return out.withSweeps(u, len(qs)-1)
}

// withSweeps is the budget with a line that raises the sum within a session to u.
func (b *Budget) withSweeps(u float64, nu int) *Budget {
	out := &Budget{}
	square, at := u*u, 0
	for _, c := range b.Lines {
		if c.Input == InSweeps {
			continue
		}
		if c.Input.In(Within) {
			square -= c.Share() * c.Share()
			at = len(out.Lines) + 1
		}
		out.Lines = append(out.Lines, c)
	}
	if square > 1e-15*u*u {
		info := inputInfos[InSweeps]
		line := Contribution{Input: InSweeps, Name: info.name, U: math.Sqrt(square), C: 1, Type: info.kind, Shape: info.shape, Nu: float64(nu)}
		out.Lines = append(out.Lines[:at], append([]Contribution{line}, out.Lines[at:]...)...)
	}
	return out
}
