package rehearsal

import (
	"cmp"
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"time"

	"gatesill/store/record"
)

// Sent is bytes that an instrument sends: all at once at At, or each as long after
// the one before it as a byte takes on the wire, the first arriving one ByteTime
// after At.
type Sent struct {
	Line     string
	At       float64 // s
	Bytes    []byte
	ByteTime time.Duration // 0: at once
	Frame    bool          // a frame or reply of a meter; else of a supply, or garbage
}

// instrument is a meter or a supply at the end of a line.
type instrument struct {
	line     string // that it was built on; faults name it by this or by its roles
	channels []*channel
	supply   *supply
	format   frames
	byteTime time.Duration
	rng      *rand.Rand

	console *console // of SCPI meters and supplies
	start   float64  // of the conversion under way or next; +Inf none
	nplc    float64  // s, integration that was commanded, 0 none
	wrong   bool     // the function that was commanded is not what the leads are for
	unsaid  int      // frames that the format has no form for

	latest []shown // of the last conversion that showed something
	out    []Sent  // not yet due, ascending

	silent, slow, late, dirty float64 // until when, s
	slowBy, lateBy, share     float64
}

// Mains is the mains frequency that a number of power-line cycles counts by, Hz.
const mains = 50

// integration is how long a conversion takes, s.
func (i *instrument) integration() float64 {
	if i.nplc > 0 {
		return i.nplc
	}
	s, _ := i.channels[0].conversion()
	return s
}

// next is the next instant after now at which something begins or ends.
func (i *instrument) next(now float64) float64 {
	t := math.Inf(1)
	if i.supply == nil {
		if i.start > now {
			t = i.start
		} else {
			t = i.start + i.integration()
		}
	}
	if i.console != nil {
		if d, ok := i.console.due(); ok {
			t = min(t, max(d, now))
		}
	}
	return t
}

// active tells whether a conversion is under way just after t.
func (i *instrument) active(t float64) bool {
	return i.supply == nil && i.start <= t && t < i.start+i.integration()
}

// work does what is due at now.
func (i *instrument) work(now float64) {
	const exact = 1e-9 // s, so that sums of times need not agree to the last bit
	if i.supply == nil && now >= i.start+i.integration()-exact {
		i.converted(i.start + i.integration())
	}
	if i.console == nil {
		return
	}
	for {
		d, ok := i.console.due()
		if !ok || d > now+exact {
			return
		}
		if b := i.console.run(now); b != nil {
			i.send(now, b, i.supply == nil)
		}
	}
}

// converted ends a conversion at t.
func (i *instrument) converted(t float64) {
	list := make([]shown, len(i.channels))
	fresh, again := false, false
	for k, c := range i.channels {
		mean := c.sum / i.integration()
		c.sum = 0
		if i.wrong {
			mean = 0
		}
		s, ok, changed := c.convert(mean, t)
		list[k] = s
		if !ok && c.any {
			list[k] = c.last // in a line with others that do have something new
		}
		fresh = fresh || ok
		again = again || changed || !ok
	}
	first := i.channels[0]
	if i.console != nil {
		if again && !(t < first.overload) {
			i.start = t // the instrument changes its range and measures once more
			return
		}
		i.start = math.Inf(1)
		i.latest = list
		at := t + first.Processing + i.lag(t)
		if b := i.console.answer(i.format.reply(list), at); b != nil {
			i.send(at, b, true)
		}
		return
	}
	_, cycle := first.conversion()
	if t < i.slow {
		cycle += cmp.Or(i.slowBy, 4*cycle)
	}
	i.start += cycle
	if !fresh {
		return
	}
	i.latest = list
	if i.format.ask != "" {
		return // it waits until it is asked
	}
	b, err := i.format.encode(list)
	if err != nil {
		i.unsaid++
		return
	}
	at := t + first.Processing + i.lag(t)
	i.send(at, b, true)
	if i.format.twice {
		i.send(at+max(cycle/2, float64(len(b))*i.byteTime.Seconds()), b, true)
	}
}

func (i *instrument) lag(t float64) float64 {
	l := i.channels[0].Lag
	if t < i.late {
		l += cmp.Or(i.lateBy, 0.2)
	}
	return l
}

// hear takes bytes that came in at t.
func (i *instrument) hear(b []byte, t float64) {
	switch {
	case t < i.silent:
	case i.console != nil:
		c := i.console
		usual := c.latency
		if t < i.slow {
			c.latency += cmp.Or(i.slowBy, 0.5)
		}
		c.hear(b, t)
		c.latency = usual
	case i.format.ask != "" && strings.ContainsAny(string(b), i.format.ask) && len(i.latest) > 0:
		if reply, err := i.format.encode(i.latest); err == nil {
			i.send(t+i.channels[0].Processing+i.lag(t), reply, true)
		} else {
			i.unsaid++
		}
	}
}

// send puts bytes on the line at t, with what garbage was ordered.
func (i *instrument) send(t float64, b []byte, frame bool) {
	if t < i.silent {
		return
	}
	s := Sent{Line: i.line, At: t, Bytes: b, ByteTime: i.byteTime, Frame: frame}
	if t < i.dirty && i.rng.Float64() < cmp.Or(i.share, 0.5) {
		rubbish := make([]byte, 1+i.rng.IntN(5))
		for k := range rubbish {
			rubbish[k] = byte(i.rng.Uint32())
		}
		place := 0 // between frames, or inside one
		if i.rng.IntN(2) == 1 {
			place = i.rng.IntN(len(b))
		}
		s.Bytes = append(append(append([]byte{}, b[:place]...), rubbish...), b[place:]...)
		s.Frame = frame && place == 0
	}
	k := len(i.out)
	for k > 0 && i.out[k-1].At > t {
		k--
	}
	i.out = append(i.out, Sent{})
	copy(i.out[k+1:], i.out[k:])
	i.out[k] = s
}

// do carries out a command of an SCPI meter.
func (i *instrument) do(header, args string, t float64) result {
	c := i.channels[0]
	kind, other := "VOLTage", "CURRent"
	if c.Role == "current" {
		kind, other = other, kind
	}
	say := func(s string) result { return result{reply: s, query: true} }
	measure := func() result {
		i.start, c.sum = t, 0
		return result{later: true}
	}
	configure := func(wrong bool) result {
		i.wrong, i.nplc, c.auto = wrong, 0, true
		top, _, _ := strings.Cut(args, ",")
		switch strings.ToUpper(strings.TrimSpace(top)) {
		case "", "AUTO", "DEF":
			return result{}
		}
		v, err := record.ParseNumber(top, units[c.Role])
		if err != nil {
			return result{err: badArgument}
		}
		if !wrong && !c.setRange(v) {
			return result{err: outOfRange}
		}
		return result{}
	}
	sense := "[SENSe:]" + kind + "[:DC]:"
	switch {
	case strings.EqualFold(header, "*RST"):
		i.wrong, i.nplc, c.auto = false, 0, true
	case spells(header, "READ?"):
		return measure()
	case spells(header, "FETCh?"):
		if len(i.latest) == 0 {
			return result{err: stale}
		}
		return say(i.format.reply(i.latest))
	case spells(header, "MEASure[:SCALar]:"+kind+"[:DC]?"):
		if r := configure(false); r.err != "" {
			return r
		}
		return measure()
	case spells(header, "CONFigure[:SCALar]:"+kind+"[:DC]"):
		return configure(false)
	case spells(header, "CONFigure[:SCALar]:"+other+"[:DC]"):
		return configure(true)
	case spells(header, "CONFigure?"):
		return say(fmt.Sprintf(`"%s %+.8E,%+.8E"`, strings.ToUpper(kind[:4]), c.Tops[c.at], c.Tops[c.at]/c.Counts))
	case spells(header, sense+"NPLCycles"):
		v, err := record.ParseNumber(args, "")
		if err != nil || !(v > 0 && v <= 100) {
			return result{err: outOfRange}
		}
		i.nplc = v / mains
	case spells(header, sense+"NPLCycles?"):
		return say(strconv.FormatFloat(i.integration()*mains, 'g', 6, 64))
	case spells(header, sense+"RANGe[:UPPer]"):
		v, err := record.ParseNumber(args, units[c.Role])
		if err != nil || !c.setRange(v) {
			return result{err: outOfRange}
		}
	case spells(header, sense+"RANGe[:UPPer]?"):
		return say(fmt.Sprintf("%+.8E", c.Tops[c.at]))
	case spells(header, sense+"RANGe:AUTO"):
		c.auto = strings.EqualFold(args, "ON") || args == "1"
	case spells(header, "TRIGger:SOURce"), spells(header, "TRIGger:COUNt"), spells(header, "SAMPle:COUNt"), spells(header, "ABORt"):
	default:
		return result{err: undefinedHeader}
	}
	return result{}
}
