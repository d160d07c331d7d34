package job

import (
	"context"
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"gatesill/fit"
	"gatesill/fit/gauge"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// GaugeRequest is what the gauge verb was asked for.
type GaugeRequest struct {
	By            string     // "vgsth", "vgs-idle"; "": as the lot is sorted
	Tempco        record.Num // V/K
	Repeatability record.Num // V, known from elsewhere
	Rounds        int        // write an order for so many rounds instead; 0: no
	Parts         int        // of so many devices
}

// Gauge shows what the bench of a lot can tell apart, and what became of its
// devices since they were measured first.
func Gauge(ctx context.Context, env *Env, name string, o SheetOptions, rq GaugeRequest) error {
	if rq.Rounds > 0 {
		return gaugeOrder(ctx, env, name, rq)
	}
	if x, ok := rq.Repeatability.Get(); ok && !(x > 0) {
		return Usage("--repeatability 1.5mV", "--repeatability: %v V, must be above 0", x)
	}
	if err := checkTempco(rq.Tempco); err != nil {
		return err
	}
	s, err := env.Sheet(ctx, name, o)
	if err != nil {
		return err
	}
	env.doubtTempco(rq.Tempco, s.Part)
	by := s.SortedBy
	if rq.By != "" {
		k, ok := sortKeys[rq.By]
		if !ok || k.unit != "V" {
			return Usage("--by vgsth or --by vgs-idle", "--by %s: no such gate voltage", rq.By)
		}
		by = k.key
	}
	if by == fit.KeyVgsIdle && math.IsNaN(s.IdleCurrent) {
		return Usage("gatesill lot edit "+Quote(name)+" --idle-current 250mA", "--by vgs-idle: the part has no idle current")
	}
	known := gauge.None()
	if r, ok := s.Repeatability[by]; ok {
		known = r
	}
	if x, ok := rq.Repeatability.Get(); ok {
		known = gauge.Given(x)
	}
	runs, left := mostly(sittingsOf(&s))
	g := report.Gauge{By: by, Finding: gauge.FindingOf(measurings(runs, by), known, rq.Tempco.Float()), Used: known}
	if left > 0 {
		g.Warnings = append(g.Warnings, fit.Warning{Code: fit.CodeUnlikeConditions, Text: fmt.Sprintf(
			"left out here: %s in another circuit than most (%s)", count(left, "measuring"), runs[0].circuit)})
	}
	if env.JSON {
		return report.GaugeJSON(env.Out, s, g)
	}
	return report.GaugeTable(env.Out, s, g, env.style())
}

// usualParts is how many devices a study has where nothing else is asked for
// (common practice, no source).
const usualParts = 10

// gaugeOrder writes the order in which devices are to be measured: drawn at random
// among those of the lot that count, each round anew, the same for the same lot and
// numbers every time it is asked for.
func gaugeOrder(ctx context.Context, env *Env, name string, rq GaugeRequest) error {
	var devices []string
	err := env.view(ctx, func(tx *store.Tx) error {
		lot, _, err := lotOf(tx, name)
		if err != nil {
			return err
		}
		list, err := tx.Devices(lot.ID)
		for _, d := range list {
			if !d.Excluded && d.Role != record.Control {
				devices = append(devices, d.Name)
			}
		}
		return err
	})
	if err != nil {
		return err
	}
	if len(devices) < 2 {
		return failed("gatesill import "+Quote(name)+" FILE", "lot %q: %s, an order needs two", name, count(len(devices), "device"))
	}
	hash := sha256.Sum256([]byte(name))
	seed := binary.BigEndian.Uint64(hash[:8])
	plan := report.GaugeOrder{Lot: name, Seed: seed, Of: len(devices)}
	random := rand.New(rand.NewPCG(seed, uint64(rq.Rounds)))
	shuffle := func(list []string) []string {
		out := slices.Clone(list)
		random.Shuffle(len(out), func(i, j int) { out[i], out[j] = out[j], out[i] })
		return out
	}
	parts := rq.Parts
	if parts == 0 {
		parts = usualParts
	}
	chosen := shuffle(devices)[:min(parts, len(devices))]
	for range rq.Rounds {
		plan.Rounds = append(plan.Rounds, shuffle(chosen))
	}
	if env.JSON {
		return report.GaugeOrderJSON(env.Out, plan)
	}
	return report.GaugeOrderText(env.Out, plan, env.style())
}
