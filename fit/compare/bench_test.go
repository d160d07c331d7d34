package compare

import "testing"

// Two lots of 5,000 devices with curves, everything that Lots does.
func BenchmarkLots5000(b *testing.B) {
	d := draws(9, 1)
	x, y := d.curves("A", 5000, 0), d.curves("B", 5000, 0.01)
	opt := plain()
	opt.Pairing = ByLikeness
	b.ResetTimer()
	for range b.N {
		if _, err := Lots(*x, *y, opt); err != nil {
			b.Fatal(err)
		}
	}
}
