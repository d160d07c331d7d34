package port

import (
	"os"
	"slices"
	"testing"
	"time"
)

// BenchmarkArrival measures how long a frame of 14 bytes takes from the far end of a
// pseudo-terminal to its reader, who waits for it.
func BenchmarkArrival(b *testing.B) {
	for _, w := range ways {
		b.Run(w.name, func(b *testing.B) {
			far, device := pty(b)
			c, err := w.open(device, defaultReadTimeout)
			if err != nil {
				b.Fatal(err)
			}
			defer c.Close()
			sent := make(chan time.Time, 1)
			next := make(chan bool)
			go frames(far, sent, next)
			var took []time.Duration
			buf := make([]byte, 64)
			for b.Loop() {
				next <- true
				for n := 0; n < 14; {
					m, err := c.Read(buf)
					if err != nil {
						b.Fatal(err)
					}
					n += m
				}
				took = append(took, time.Since(<-sent))
			}
			close(next)
			slices.Sort(took)
			b.ReportMetric(float64(took[len(took)/2].Nanoseconds())/1e3, "us-median")
			b.ReportMetric(float64(took[len(took)*99/100].Nanoseconds())/1e3, "us-p99")
		})
	}
}

func frames(far *os.File, sent chan<- time.Time, next <-chan bool) {
	for range next {
		time.Sleep(time.Millisecond) // so that the reader waits
		at := time.Now()
		far.Write(make([]byte, 14))
		sent <- at
	}
}

// BenchmarkOpen measures opening and closing a line.
func BenchmarkOpen(b *testing.B) {
	_, device := pty(b)
	for b.Loop() {
		c, err := Open(device, Settings{})
		if err != nil {
			b.Fatal(err)
		}
		c.Close()
	}
}
