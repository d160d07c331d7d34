package rehearsal

import (
	"fmt"
	"strings"
)

// console is the command side of a simulated instrument: it takes messages line by
// line, does one command after the other, keeps the error queue and the registers
// of IEEE 488.2. What the commands mean is up to its instrument.
type console struct {
	name    string // second field of the answer to *IDN?
	latency float64
	do      func(header, args string, at float64) result
	heard   func(text, reply string, at float64) // nil: nobody keeps a log

	line    []byte
	queue   []command
	replies []string // of the message under way
	waiting bool     // a command is under way that answers later
	errs    []string
	status  int // standard event status register
	enable  int
}

// command is one command of a message.
type command struct {
	text string
	at   float64 // when it is done, not before the one ahead of it
	last bool    // of its message
}

// result is what became of a command.
type result struct {
	reply string
	query bool
	later bool   // the reply comes by a call of answer
	err   string // for the error queue; "" done
}

// Errors of the queue. -113 and -350: seen in instrument manuals; the other numbers
// from memory of SCPI-1999 volume 2.
const (
	undefinedHeader = `-113,"Undefined header"`
	missingArgument = `-109,"Missing parameter"`
	badArgument     = `-104,"Data type error"`
	outOfRange      = `-222,"Data out of range"`
	notNow          = `-221,"Settings conflict"`
	stale           = `-230,"Data corrupt or stale"`
	tooLong         = `-363,"Input buffer overrun"`
	overflow        = `-350,"Queue overflow"`
	noError         = `0,"No error"`
)

// depth is how many errors are kept; the last place is for the overflow.
const depth = 20

func (c *console) fail(err string) {
	switch {
	case strings.HasPrefix(err, "-1"):
		c.status |= 32
	case strings.HasPrefix(err, "-2"):
		c.status |= 16
	case strings.HasPrefix(err, "-3"):
		c.status |= 8
	}
	if len(c.errs) < depth {
		c.errs = append(c.errs, err)
	} else {
		c.errs[depth-1] = overflow
	}
}

// hear takes bytes that came in at t. LF, CR and CR LF end a message.
func (c *console) hear(b []byte, t float64) {
	const longest = 4096
	for _, x := range b {
		if x != '\n' && x != '\r' {
			if len(c.line) < longest {
				c.line = append(c.line, x)
			}
			continue
		}
		text := string(c.line)
		full := len(c.line) == longest
		c.line = c.line[:0]
		if full {
			c.fail(tooLong)
			continue
		}
		var units []string
		for _, u := range strings.Split(text, ";") {
			if u = strings.TrimSpace(u); u != "" {
				units = append(units, u)
			}
		}
		for i, u := range units {
			c.queue = append(c.queue, command{text: u, at: t + c.latency, last: i == len(units)-1})
		}
	}
}

// due is when the next command is done, and whether there is one that can be.
func (c *console) due() (float64, bool) {
	if c.waiting || len(c.queue) == 0 {
		return 0, false
	}
	return c.queue[0].at, true
}

// run does the next command and gives the bytes to send when it ends a message.
func (c *console) run(now float64) []byte {
	r := c.common(c.queue[0].text, now)
	if r.later {
		c.waiting = true
		return nil
	}
	return c.finish(r, now)
}

// answer ends the command that was waiting.
func (c *console) answer(reply string, now float64) []byte {
	if !c.waiting {
		return nil
	}
	c.waiting = false
	return c.finish(result{reply: reply, query: true}, now)
}

// finish takes the command from the queue, and the message's replies out with the
// last one.
func (c *console) finish(r result, now float64) []byte {
	q := c.queue[0]
	c.queue = c.queue[1:]
	if r.err != "" {
		c.fail(r.err)
	} else if r.query {
		c.replies = append(c.replies, r.reply)
	}
	if c.heard != nil {
		c.heard(q.text, r.reply, now)
	}
	if !q.last || len(c.replies) == 0 {
		return nil
	}
	out := strings.Join(c.replies, ";") + "\n"
	c.replies = c.replies[:0]
	return []byte(out)
}

// common does what every instrument must (IEEE 488.2-1992 chapter 10, from memory)
// and passes on the rest.
func (c *console) common(text string, now float64) result {
	header, args, _ := strings.Cut(text, " ")
	args = strings.TrimSpace(args)
	header = strings.TrimPrefix(header, ":")
	say := func(s string) result { return result{reply: s, query: true} }
	switch strings.ToUpper(header) {
	case "*IDN?":
		return say("REHEARSAL," + c.name + ",0,1")
	case "*CLS":
		c.errs, c.status = nil, 0
		return result{}
	case "*OPC?":
		return say("1")
	case "*OPC":
		c.status |= 1
		return result{}
	case "*ESR?":
		s := c.status
		c.status = 0
		return say(fmt.Sprint(s))
	case "*ESE?":
		return say(fmt.Sprint(c.enable))
	case "*ESE":
		if _, err := fmt.Sscan(args, &c.enable); err != nil {
			return result{err: missingArgument}
		}
		return result{}
	case "*STB?":
		s := 0
		if len(c.errs) > 0 {
			s |= 4
		}
		if c.status&c.enable != 0 {
			s |= 32
		}
		return say(fmt.Sprint(s))
	case "*SRE?", "*TST?":
		return say("0")
	case "*SRE", "*WAI":
		return result{}
	}
	switch {
	case spells(header, "SYSTem:ERRor[:NEXT]?"):
		if len(c.errs) == 0 {
			return say(noError)
		}
		e := c.errs[0]
		c.errs = c.errs[1:]
		return say(e)
	case spells(header, "SYSTem:VERSion?"):
		return say("1999.0")
	case spells(header, "SYSTem:REMote"), spells(header, "SYSTem:LOCal"), spells(header, "SYSTem:RWLock"):
		return result{}
	}
	return c.do(header, args, now)
}

// spells tells whether a header is a spelling of a pattern such as
// "[SOURce:]VOLTage[:LEVel]?": capitals are the short form, nodes in brackets may
// be left out, and a node may end in 1.
func spells(header, pattern string) bool {
	header, ask := strings.CutSuffix(header, "?")
	pattern, asks := strings.CutSuffix(pattern, "?")
	if ask != asks {
		return false
	}
	nodes := strings.FieldsFunc(strings.NewReplacer("[", " [", "]", "] ").Replace(pattern), func(r rune) bool { return r == ' ' })
	var list []string // "VOLTage" or "[LEVel"
	for _, n := range nodes {
		opt := ""
		if strings.HasPrefix(n, "[") {
			opt = "["
		}
		for _, one := range strings.Split(strings.Trim(n, "[]"), ":") {
			if one != "" {
				list = append(list, opt+one)
			}
		}
	}
	return spellsNodes(strings.Split(header, ":"), list)
}

func spellsNodes(given, pattern []string) bool {
	if len(pattern) == 0 {
		return len(given) == 0
	}
	name, optional := strings.CutPrefix(pattern[0], "[")
	if optional && spellsNodes(given, pattern[1:]) {
		return true
	}
	if len(given) == 0 {
		return false
	}
	g := strings.ToUpper(strings.TrimSuffix(given[0], "1"))
	short := strings.TrimRight(name, "abcdefghijklmnopqrstuvwxyz")
	return (g == short || g == strings.ToUpper(name)) && spellsNodes(given[1:], pattern[1:])
}
