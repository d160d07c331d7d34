package record

import (
	"crypto/sha256"
	"encoding/hex"
	"math"
	"strconv"
)

// Hash is the SHA-256, in hex, over what was measured: the quantity and the
// JSON text of every column in the order in which they stand, then the marks.
// Names, conditions and times take no part, so the same block of rows under two
// names has one hash. A column without Text is hashed as it would be written.
func (s *Sweep) Hash() string {
	h := sha256.New()
	var buf []byte
	for i := range s.Columns {
		c := &s.Columns[i]
		buf = append(append(buf[:0], c.Quantity...), '\n')
		h.Write(buf)
		if len(c.Text) > 0 {
			h.Write(c.Text)
		} else {
			h.Write(writeArray(buf[:0], c.Values))
		}
		h.Write([]byte{'\n'})
	}
	for _, m := range s.Marks {
		buf = strconv.AppendInt(buf[:0], int64(m.Index), 10)
		buf = append(append(append(append(buf, ' '), m.Quantity...), ' '), m.State...)
		buf = append(strconv.AppendQuote(append(buf, ' '), m.Raw), '\n')
		h.Write(buf)
	}
	var sum [sha256.Size]byte
	return hex.EncodeToString(h.Sum(sum[:0]))
}

// writeArray appends the numbers as a JSON array, null for those that are not
// finite.
func writeArray(buf []byte, x []float64) []byte {
	buf = append(buf, '[')
	for i, v := range x {
		if i > 0 {
			buf = append(buf, ',')
		}
		if math.IsNaN(v) || math.IsInf(v, 0) {
			buf = append(buf, "null"...)
			continue
		}
		buf = strconv.AppendFloat(buf, v, 'g', -1, 64)
	}
	return append(buf, ']')
}
