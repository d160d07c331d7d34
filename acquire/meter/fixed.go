package meter

// fixed finds frames of one length by what may stand at each place. Nothing is
// looked for beyond a frame's own bytes, so the frames found do not depend on how
// the stream was cut.
type fixed struct {
	n int
	// could tells whether b, at most n bytes, can be the beginning of a frame. What
	// it refuses it refuses with more bytes too.
	could func(b []byte) bool
	// read takes the frame apart.
	read func(f []byte) (Reading, error)
}

func (d fixed) Scan(buf []byte, quiet bool) (skip, length int, readings []Reading, err error) {
	for i := range buf {
		w := buf[i:min(len(buf), i+d.n)]
		if !d.could(w) {
			continue
		}
		if len(w) < d.n {
			if quiet {
				break
			}
			return i, 0, nil, nil
		}
		r, err := d.read(w)
		if err != nil {
			return i, d.n, nil, err
		}
		return i, d.n, []Reading{r}, nil
	}
	return len(buf), 0, nil, nil
}

// digits reads ASCII digits, each masked to 7 bits.
func digits(b []byte) (int64, error) {
	var m int64
	for _, c := range b {
		c &= 0x7F
		if c < '0' || c > '9' {
			return 0, bad("%q are no digits", b)
		}
		m = m*10 + int64(c-'0')
	}
	return m, nil
}

// ones counts which of the flags is set and gives the last; it is for flags of
// which exactly one, or at most one, may be set.
func ones[T any](list []flag[T]) (last T, n int) {
	for _, f := range list {
		if f.set {
			last = f.is
			n++
		}
	}
	return last, n
}

type flag[T any] struct {
	set bool
	is  T
}
