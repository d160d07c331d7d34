package svg

import (
	"bytes"
	"compress/gzip"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
	"time"
)

// inventedCurves makes n curves of a plain square law with a soft knee, with
// the hand-turned gate steps and the noise of a 6,000-count meter. Invented
// data.
func inventedCurves(n, points int) []Curve {
	rng := rand.New(rand.NewPCG(1, 2))
	list := make([]Curve, n)
	for i := range list {
		vt, beta := 3+0.08*rng.NormFloat64(), 3.8*(1+0.03*rng.NormFloat64())
		c := Curve{Name: fmt.Sprintf("D%04d", i+1)}
		if i%100 == 7 {
			c.Flag = "threshold far from the others"
			vt -= 0.5
		}
		for k := range points {
			vg := 2 + 2*float64(k)/float64(points-1) + 0.004*rng.NormFloat64()
			v := 0.06 * math.Log1p(math.Exp((vg-vt)/0.06))
			id := beta/2*v*v/(1+0.15*v)*(1+0.003*rng.NormFloat64()) + 2e-6
			c.X = append(c.X, math.Round(vg*1000)/1000)
			c.Y = append(c.Y, math.Round(id*1e5)/1e5)
		}
		list[i] = c
	}
	return list
}

func gzipped(b []byte) int {
	var buf bytes.Buffer
	w, _ := gzip.NewWriterLevel(&buf, gzip.DefaultCompression)
	w.Write(b)
	w.Close()
	return buf.Len()
}

// BenchmarkTransfer1000 draws 1,000 curves of 30 points with axes. The aims are
// 20 ms and 100,000 bytes gzipped, on each current axis.
func BenchmarkTransfer1000(b *testing.B) {
	curves := inventedCurves(1000, 30)
	for _, axis := range []Axis{Linear, SquareRoot, Logarithmic} {
		b.Run(axis.String(), func(b *testing.B) {
			var picture []byte
			best := time.Hour
			for b.Loop() {
				begun := time.Now()
				picture, _ = AppendTransfer(nil, curves, TransferOptions{Frame: Frame{ID: "p", Title: "t", Focus: 20}, Axis: axis})
				best = min(best, time.Since(begun))
			}
			b.ReportMetric(float64(best.Microseconds())/1000, "best-ms/picture") // on a busy machine the mean tells of the others
			b.ReportMetric(float64(b.Elapsed().Microseconds())/float64(b.N)/1000, "ms/picture")
			b.ReportMetric(float64(len(picture)), "bytes")
			b.ReportMetric(float64(gzipped(picture)), "gzipped-bytes")
		})
	}
}
