package rehearsal

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"strings"

	"gatesill/store/record"
)

// output is the output of a supply: first-order from where it was to where it is
// told to be.
type output struct {
	on    bool
	set   float64 // V
	limit float64 // A
	fall  float64 // s, time constant downwards
	rise  float64
	holds bool // an open output leaves the voltage where it is (a gate's charge)

	from, to, since float64
}

func (o *output) at(t float64) float64 {
	tau := o.rise
	if math.Abs(o.to) < math.Abs(o.from) {
		tau = o.fall
	}
	return relax(o.from, o.to, t-o.since, tau)
}

// aim lets it go where setting and switch say.
func (o *output) aim(t float64) {
	v := o.at(t)
	o.from, o.since = v, t
	switch {
	case o.on:
		o.to = o.set
	case o.holds:
		o.to = v
	default:
		o.to = 0
	}
}

// Heard is one line of a supply's log: one command and what became of it.
type Heard struct {
	UnixNano int64   `json:"unix_ns"` // by the clock at the process's start and the monotonic clock since
	Elapsed  float64 `json:"t_s"`     // s since the process's start
	Text     string  `json:"text"`
	Reply    string  `json:"reply"`
	Error    string  `json:"error"` // newest of the error queue if this command put it there
	On       bool    `json:"on"`    // output, after the command
	Set      float64 `json:"set_v"`
	Output   float64 `json:"output_v"` // at the terminals, in the moment of the command
}

// supply is an SCPI supply with one output.
type supply struct {
	*output
	drives   string
	console  console
	rng      *rand.Rand
	world    *world
	most     float64 // V
	mostAmps float64
	refuse   *refusal
	stamp    func(elapsed float64) int64
	log      io.Writer // nil: none
	known    int       // errors put into the queue by fail
}

// refusal is an order to refuse the next matching command.
type refusal struct {
	match string // beginning, in capitals; "" whatever sets something
	until float64
}

func (s *supply) reset(t float64) {
	s.on, s.set, s.limit = false, 0, s.mostAmps
	s.aim(t)
}

const (
	voltLevel = "[SOURce:]VOLTage[:LEVel][:IMMediate][:AMPLitude]"
	ampLevel  = "[SOURce:]CURRent[:LEVel][:IMMediate][:AMPLitude]"
	onOff     = "OUTPut[:STATe]"
)

func (s *supply) do(header, args string, t float64) result {
	say := func(format string, v ...any) result { return result{reply: fmt.Sprintf(format, v...), query: true} }
	if r := s.refuse; r != nil && t < r.until && !strings.HasSuffix(header, "?") {
		if strings.HasPrefix(strings.ToUpper(strings.TrimSpace(header+" "+args)), r.match) {
			s.refuse = nil
			return result{err: notNow}
		}
	}
	switch {
	case strings.EqualFold(header, "*RST"):
		s.reset(t)
	case spells(header, voltLevel+"?"):
		return say("%.4f", s.set)
	case spells(header, ampLevel+"?"):
		return say("%.4f", s.limit)
	case spells(header, onOff+"?"):
		if s.on {
			return say("1")
		}
		return say("0")
	case spells(header, "MEASure[:SCALar][:VOLTage][:DC]?"), spells(header, "MEASure[:SCALar]:VOLTage[:DC]?"):
		const readback = 5e-4 // V, standard deviation
		return say("%.3f", s.at(t)+readback*s.rng.NormFloat64())
	case spells(header, "MEASure[:SCALar]:CURRent[:DC]?"):
		const readback = 2e-4 // A, standard deviation
		i := 0.0
		if s.drives == "drain" {
			i = s.world.at(t).Id
		}
		return say("%.4f", i+readback*s.rng.NormFloat64())
	case spells(header, voltLevel):
		v, r := s.number(args, "V", s.most)
		if r.err != "" {
			return r
		}
		s.set = v
		s.aim(t)
	case spells(header, ampLevel):
		v, r := s.number(args, "A", s.mostAmps)
		if r.err != "" {
			return r
		}
		s.limit = v
	case spells(header, onOff):
		switch strings.ToUpper(args) {
		case "ON", "1":
			s.on = true
		case "OFF", "0":
			s.on = false
		case "":
			return result{err: missingArgument}
		default:
			return result{err: badArgument}
		}
		s.aim(t)
	default:
		return result{err: undefinedHeader}
	}
	return result{}
}

// number reads a setting from 0 to most.
func (s *supply) number(args, unit string, most float64) (float64, result) {
	switch strings.ToUpper(args) {
	case "":
		return 0, result{err: missingArgument}
	case "MIN", "MINIMUM":
		return 0, result{}
	case "MAX", "MAXIMUM":
		return most, result{}
	}
	v, err := record.ParseNumber(args, unit)
	if err != nil {
		return 0, result{err: badArgument}
	}
	if !(v >= 0 && v <= most) {
		return 0, result{err: outOfRange}
	}
	return v, result{}
}

// heard writes the log. A log that cannot be written is told by the status, not
// here: the supply goes on.
func (s *supply) heard(text, reply string, t float64) {
	if s.log == nil {
		return
	}
	h := Heard{Elapsed: t, UnixNano: s.stamp(t), Text: text, Reply: reply, On: s.on, Set: s.set, Output: s.at(t)}
	if n := len(s.console.errs); n > s.known {
		h.Error = s.console.errs[n-1]
	}
	s.known = len(s.console.errs)
	if b, err := json.Marshal(h); err == nil {
		s.log.Write(append(b, '\n'))
	}
}
