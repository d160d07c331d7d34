package record

import "math"

// LastDigit is the place of the last digit in which the column was written, in
// the unit of its quantity: 0.001 for "[3.012,2.98]", 1e-5 for "[2.50e-3]". It is
// the finest over the column, and 0 when the column has no Text or no number.
// It is what a display shows, and an upper bound for what it resolves.
func (c *Column) LastDigit() float64 {
	least := math.MaxInt
	for i := 0; i < len(c.Text); {
		if b := c.Text[i]; b < '0' || b > '9' {
			i++
			continue
		}
		place, point, j := 0, false, i
		for ; j < len(c.Text); j++ {
			b := c.Text[j]
			if b == '.' && !point {
				point = true
			} else if b >= '0' && b <= '9' {
				if point {
					place--
				}
			} else {
				break
			}
		}
		if j < len(c.Text) && (c.Text[j] == 'e' || c.Text[j] == 'E') {
			sign, exp := 1, 0
			j++
			if j < len(c.Text) && (c.Text[j] == '-' || c.Text[j] == '+') {
				if c.Text[j] == '-' {
					sign = -1
				}
				j++
			}
			for ; j < len(c.Text) && c.Text[j] >= '0' && c.Text[j] <= '9'; j++ {
				exp = min(exp*10+int(c.Text[j]-'0'), 1000)
			}
			place += sign * exp
		}
		least = min(least, place)
		i = j
	}
	if least == math.MaxInt {
		return 0
	}
	return math.Pow10(least)
}
