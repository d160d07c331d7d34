//go:build unix

package store

import (
	"context"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// inventedSweeps makes sweeps of invented devices, rows like "3.012,0.0123".
// Seed 1, so that every run stores the same bytes.
func inventedSweeps(lotID string, devices []record.Device, points int) []record.Sweep {
	r := rand.New(rand.NewPCG(1, 1))
	ss := make([]record.Sweep, len(devices))
	line := 2
	for i := range ss {
		vg, id := make([]float64, points), make([]float64, points)
		vgText, idText := []byte{'['}, []byte{'['}
		for k := range points {
			v := strconv.FormatFloat(2+3*float64(k)/float64(points), 'f', 3, 64)
			c := strconv.FormatFloat(0.001+r.Float64()*0.09, 'f', 4, 64)
			vg[k], _ = strconv.ParseFloat(v, 64)
			id[k], _ = strconv.ParseFloat(c, 64)
			if k > 0 {
				vgText, idText = append(vgText, ','), append(idText, ',')
			}
			vgText, idText = append(vgText, v...), append(idText, c...)
		}
		ss[i] = record.Sweep{
			LotID: lotID, DeviceID: devices[i].ID, Position: i + 1, Direction: record.Up, MeasuredAt: "2024-05-06",
			Condition: record.Condition{Circuit: record.Load, RL: record.Known(10), VDD: record.Known(12), Temp: record.Known(25), TempOf: "ambient"},
			Columns: []record.Column{
				{Quantity: record.VG, Values: vg, Text: append(vgText, ']')},
				{Quantity: record.ID, Values: id, Text: append(idText, ']')},
			},
			Lines: []record.Lines{{Point: 0, Line: line, Count: points}},
		}
		line += points
	}
	return ss
}

// cpuTime is the processor time this process has used.
func cpuTime() time.Duration {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		return 0
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

// BenchmarkAddSweeps stores 1,000,000 rows in one transaction, store and
// devices included, as an import does.
func BenchmarkAddSweeps(b *testing.B) {
	for _, n := range []int{1000, 5000} {
		b.Run(strconv.Itoa(n), func(b *testing.B) {
			ctx := context.Background()
			const rows = 1_000_000
			var size int64
			var cpu time.Duration
			for b.Loop() {
				b.StopTimer()
				path := filepath.Join(b.TempDir(), "x.db")
				db, err := Open(ctx, path, Options{Create: true})
				require.NoError(b, err)
				devices := make([]record.Device, n)
				sweeps := inventedSweeps("", devices, rows/n)
				cpu -= cpuTime()
				b.StartTimer()
				require.NoError(b, db.Update(ctx, func(tx *Tx) error {
					_, ds := addLot(b, tx, "A", n)
					for i := range sweeps {
						sweeps[i].DeviceID = ds[i].ID
					}
					return tx.AddSweeps(sweeps)
				}))
				require.NoError(b, db.Close())
				b.StopTimer()
				cpu += cpuTime()
				info, err := os.Stat(path)
				require.NoError(b, err)
				size = info.Size()
				b.StartTimer()
			}
			b.ReportMetric(float64(b.N)*rows/b.Elapsed().Seconds()/1e6, "Mrows/s")
			b.ReportMetric(cpu.Seconds()/float64(b.N), "cpu-s/op")
			b.ReportMetric(float64(size)/rows, "B/row")
		})
	}
}

func BenchmarkSweeps(b *testing.B) {
	for _, n := range []int{1000, 5000} {
		b.Run(strconv.Itoa(n), func(b *testing.B) {
			ctx := context.Background()
			const rows = 1_000_000
			db, err := Open(ctx, filepath.Join(b.TempDir(), "x.db"), Options{Create: true})
			require.NoError(b, err)
			defer db.Close()
			var lot record.Lot
			require.NoError(b, db.Update(ctx, func(tx *Tx) error {
				l, ds := addLot(b, tx, "A", n)
				lot = l
				return tx.AddSweeps(inventedSweeps(l.ID, ds, rows/n))
			}))
			b.ResetTimer()
			for b.Loop() {
				require.NoError(b, db.View(ctx, func(tx *Tx) error {
					list, err := tx.Sweeps(lot.ID, true)
					require.Len(b, list, n)
					return err
				}))
			}
			b.ReportMetric(float64(b.N)*rows*2/b.Elapsed().Seconds()/1e6, "Mvalues/s")
		})
	}
}
