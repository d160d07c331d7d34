package match

import (
	"fmt"
	"math"
	"slices"
)

// PartnersFor ranks all other members as partners of the one of that index, which
// may be in a set or kept out itself: the survivor of a pair.
//
// Those that can be given come first, the nearest first, whether within the
// tolerances or not; then those that cannot, with the reason. Partners are of the
// same channel; where there is none of it, of the other, compared by magnitude.
// Aim, Size and Sets of the options are not used.
//
// Errors: as of [Match]; ErrNoDevice where there is no such member or it has no
// value. Checked: TestPartners.
func PartnersFor(members []Member, device int, opt Options) ([]Partner, error) {
	if device < 0 || device >= len(members) {
		return nil, fmt.Errorf("%w: number %d of %d", ErrNoDevice, device, len(members))
	}
	opt.Aim, opt.Size, opt.Sets = Total, 2, 0
	sought := &members[device]
	same := false
	for i := range members {
		same = same || i != device && members[i].PChannel == sought.PChannel
	}
	// Whatever has values is measured against it, also what cannot be given.
	free := slices.Clone(members)
	for i := range free {
		free[i].Locked, free[i].Out, free[i].Package = "", "", ""
	}
	p, err := newProblem(free, opt)
	if err != nil {
		return nil, err
	}
	place := make([]int, len(members))
	for i := range place {
		place[i] = -1
	}
	for d, i := range p.used {
		place[i] = d
	}
	why := make([]string, len(members))
	for _, l := range p.left {
		why[l.Member] = l.Why
	}
	me := place[device]
	if me < 0 {
		return nil, fmt.Errorf("%w to seek a partner for: %s: %s", ErrNoDevice, sought.Name, why[device])
	}
	var out []Partner
	for i := range members {
		if i == device {
			continue
		}
		m := &members[i]
		x := Partner{Member: i, Name: m.Name, Lot: m.Lot, DateCode: m.DateCode, Distance: math.NaN(), Refused: notOffered(m),
			Sharing: Sharing{Gate: math.NaN(), Imbalance: math.NaN(), Share: math.NaN(), Hottest: -1, Power: math.NaN()}}
		switch {
		case x.Refused != "":
		case why[i] != "":
			x.Refused = why[i]
		case same && m.PChannel != sought.PChannel:
			x.Refused = "it is of the other channel"
		case m.Package != "" && (m.Lot != sought.Lot || m.Package != sought.Package) && sharesPackage(members, i):
			x.Refused = "it is one side of package " + m.Package + ", which is never parted"
		}
		if d := place[i]; d >= 0 {
			s := p.set([]int{me, d})
			x.Spreads, x.Distance, x.Within, x.Alike, x.Sharing = s.Spreads, float64(p.distance(me, d))/nano, s.Within, s.Alike, s.Sharing
		} else {
			x.Spreads = make([]float64, len(p.opt.By))
			for c := range x.Spreads {
				x.Spreads[c] = math.NaN()
			}
		}
		out = append(out, x)
	}
	slices.SortStableFunc(out, func(a, b Partner) int {
		rank := func(x *Partner) int {
			switch {
			case x.Refused == "":
				return 0
			case !math.IsNaN(x.Distance):
				return 1
			}
			return 2
		}
		if c := rank(&a) - rank(&b); c != 0 {
			return c
		}
		switch {
		case a.Distance < b.Distance:
			return -1
		case a.Distance > b.Distance:
			return 1
		}
		return 0
	})
	return out, nil
}

// sharesPackage reports whether another member is in the package of this one.
func sharesPackage(members []Member, i int) bool {
	for j := range members {
		if j != i && members[j].Package == members[i].Package && members[j].Lot == members[i].Lot {
			return true
		}
	}
	return false
}
