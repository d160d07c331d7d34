package lot

import (
	"math"

	"gatesill/fit"
)

// TooFew reports whether n devices are too few to judge one another.
func TooFew(n int) bool { return n < fewest }

// Pool joins the spreads of earlier lots of one part: the root of the mean
// square robust standard deviation of each quantity, weighted by the devices
// less one. Lots too small to judge themselves and lots of two populations take
// no part. nil when no lot is left.
//
// Source: pooled standard deviation, common practice, no source; that robust
// deviations are pooled in the same way is our choice.
func Pool(lots []Spread) *Known {
	k := Known{RobustSD: map[fit.Key]float64{}, Of: map[fit.Key]int{}}
	squares, weights := map[fit.Key]float64{}, map[fit.Key]float64{}
	for i := range lots {
		if lots[i].Populations > 1 {
			continue
		}
		devices := 0
		for _, of := range []map[fit.Key]Summary{lots[i].Summary, lots[i].Further} {
			for key, s := range of {
				if TooFew(s.N) || !(s.RobustSD > 0) {
					continue
				}
				devices = max(devices, s.N)
				k.Of[key] += s.N
				squares[key] += float64(s.N-1) * s.RobustSD * s.RobustSD
				weights[key] += float64(s.N - 1)
			}
		}
		if devices > 0 {
			k.Lots++
			k.Devices += devices
		}
	}
	if k.Lots == 0 {
		return nil
	}
	for key, w := range weights {
		k.RobustSD[key] = math.Sqrt(squares[key] / w)
	}
	return &k
}
