package bias

import (
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// publishedE192, E48 and E24 are IEC 60063's values as printed in the tables of public
// programs (leastrobino/matlab-functions, iec60063.m; the same numbers in others).
const (
	publishedE192 = `100 101 102 104 105 106 107 109 110 111 113 114 115 117 118 120 121 123 124 126 127 129 130 132
	133 135 137 138 140 142 143 145 147 149 150 152 154 156 158 160 162 164 165 167 169 172 174 176
	178 180 182 184 187 189 191 193 196 198 200 203 205 208 210 213 215 218 221 223 226 229 232 234
	237 240 243 246 249 252 255 258 261 264 267 271 274 277 280 284 287 291 294 298 301 305 309 312
	316 320 324 328 332 336 340 344 348 352 357 361 365 370 374 379 383 388 392 397 402 407 412 417
	422 427 432 437 442 448 453 459 464 470 475 481 487 493 499 505 511 517 523 530 536 542 549 556
	562 569 576 583 590 597 604 612 619 626 634 642 649 657 665 673 681 690 698 706 715 723 732 741
	750 759 768 777 787 796 806 816 825 835 845 856 866 876 887 898 909 920 931 942 953 965 976 988`
	publishedE96 = `100 102 105 107 110 113 115 118 121 124 127 130 133 137 140 143 147 150 154 158 162 165 169 174
	178 182 187 191 196 200 205 210 215 221 226 232 237 243 249 255 261 267 274 280 287 294 301 309
	316 324 332 340 348 357 365 374 383 392 402 412 422 432 442 453 464 475 487 499 511 523 536 549
	562 576 590 604 619 634 649 665 681 698 715 732 750 768 787 806 825 845 866 887 909 931 953 976`
	publishedE48 = `100 105 110 115 121 127 133 140 147 154 162 169 178 187 196 205 215 226 237 249 261 274 287 301
	316 332 348 365 383 402 422 442 464 487 511 536 562 590 619 649 681 715 750 787 825 866 909 953`
	publishedE24 = `10 11 12 13 15 16 18 20 22 24 27 30 33 36 39 43 47 51 56 62 68 75 82 91`
	publishedE12 = `10 12 15 18 22 27 33 39 47 56 68 82`
)

func TestSeriesTables(t *testing.T) {
	for s, text := range map[Series]string{E192: publishedE192, E96: publishedE96, E48: publishedE48, E24: publishedE24, E12: publishedE12} {
		var want []int
		for _, f := range strings.Fields(text) {
			n, err := strconv.Atoi(f)
			if err != nil {
				t.Fatal(err)
			}
			want = append(want, n)
		}
		if got := s.Decade(); !slices.Equal(got, want) {
			t.Errorf("%s: %v, want %v", s, got, want)
		}
	}
	if s, err := SeriesNamed("e96"); s != E96 || err != nil {
		t.Error(s, err)
	}
	if _, err := SeriesNamed("E100"); err == nil {
		t.Error("E100 found")
	}
	if Series("E3").Decade() != nil {
		t.Error("E3 has values")
	}
}

func TestAround(t *testing.T) {
	for _, c := range []struct {
		s    Series
		r    float64
		want []float64
	}{
		{E96, 1811, []float64{1780, 1820}},
		{E24, 1811, []float64{1800, 2000}},
		{E24, 950, []float64{910, 1000}}, // across decades
		{E24, 0.95, []float64{0.91, 1}},
		{E192, 9.19, []float64{9.09, 9.2}},
		{E12, 1000, []float64{1000, 1200}}, // a value counts to those below
	} {
		if got := c.s.Around(c.r, 1); !slices.Equal(got, c.want) {
			t.Errorf("%s around %g: %v, want %v", c.s, c.r, got, c.want)
		}
	}
	if Series(E24).Around(math.NaN(), 1) != nil || E24.Around(-1, 1) != nil {
		t.Error("values around no resistance")
	}
	rapid.Check(t, func(t *rapid.T) {
		s := rapid.SampledFrom(AllSeries).Draw(t, "series")
		r := math.Pow(10, rapid.Float64Range(-1, 7).Draw(t, "log"))
		got := s.Around(r, 2)
		if len(got) != 4 || !slices.IsSorted(got) || got[1] > r*(1+1e-9) || got[2] < r {
			t.Fatalf("%s around %g: %v", s, r, got)
		}
	})
}
