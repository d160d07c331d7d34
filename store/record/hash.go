package record

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
)

// Hash is the SHA-256, in hex, over what was measured: for each column in the
// order of [Quantities] its name, a line feed, its text and a line feed; then
// for each mark a line "index quantity state". Where and when it was measured,
// and what a state looked like in the file, do not enter, so that the same block
// of rows under two names has one hash. A column without Text enters as
// [AppendDecimals] writes its Values.
func (s *Sweep) Hash() string {
	h := sha256.New()
	for _, q := range Quantities {
		c := s.Column(q)
		if c == nil {
			continue
		}
		text := c.Text
		if len(text) == 0 {
			text = AppendDecimals(nil, c.Values)
		}
		h.Write([]byte(q))
		h.Write([]byte{'\n'})
		h.Write(text)
		h.Write([]byte{'\n'})
	}
	for _, m := range s.Marks {
		fmt.Fprintf(h, "%d %s %s\n", m.Index, m.Quantity, m.State)
	}
	return hex.EncodeToString(h.Sum(nil))
}
