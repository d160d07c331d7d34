package table

import "regexp"

// channelWords finds p-channel, P-Kanal, n channel, PMOS in a comment.
var channelWords = regexp.MustCompile(`(?i)(?:^|[^\pL\pN])([pn])[ -]?(?:channel|chan|kanal|kanaal|mos|mosfet|fet)(?:[^\pL\pN]|$)|(?i)(?:^|[^\pL\pN])canale? ([pn])(?:[^\pL\pN]|$)`)

// channelOf is the channel that a comment names, "p" or "n"; "" for none, or
// for both.
func channelOf(text string) string {
	found := ""
	for _, m := range channelWords.FindAllStringSubmatch(text, -1) {
		c := fold(m[1] + m[2])
		if found != "" && found != c {
			return ""
		}
		found = c
	}
	return found
}

// channelWord reads the value of 'channel: p'.
func channelWord(value string) string {
	switch fold(value) {
	case "p", "pch", "ptype", "ptyp":
		return "p"
	case "n", "nch", "ntype", "ntyp":
		return "n"
	}
	return channelOf(value)
}

// settleChannel tells when a comment names the other channel than the part has.
func (r *reader) settleChannel() {
	is := "n"
	if r.opt.PChannel {
		is = "p"
	}
	if said := r.talkChannel; said != "" && said != is {
		r.remark(CodeFlagWins, "the file says %s-channel, and it is read as %s-channel: --channel %s if the file is right", said, is, said)
	}
}
