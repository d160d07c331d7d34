package store

import (
	"bytes"
	"encoding/json"
	"maps"
	"slices"
	"strconv"
	"unicode/utf8"

	"gatesill/store/record"
)

// appendEstimates writes the values as a JSON object, the keys in order, what
// is not known left out.
func appendEstimates(b []byte, values map[string]record.Value) []byte {
	b = append(b, '{')
	for i, key := range slices.Sorted(maps.Keys(values)) {
		if i > 0 {
			b = append(b, ',')
		}
		v := values[key]
		b = append(appendText(b, key), ":{"...)
		start := len(b)
		for _, f := range []struct {
			name string
			n    record.Num
		}{{`"value":`, v.Value}, {`"u":`, v.U}, {`"u_between":`, v.UBetween}, {`"u_absolute":`, v.UAbsolute}} {
			if x, ok := f.n.Get(); ok {
				b = strconv.AppendFloat(append(b, f.name...), x, 'g', -1, 64)
				b = append(b, ',')
			}
		}
		if v.N != 0 {
			b = append(strconv.AppendInt(append(b, `"n":`...), int64(v.N), 10), ',')
		}
		if len(b) > start {
			b = b[:len(b)-1] // the last comma
		}
		b = append(b, '}')
	}
	return append(b, '}')
}

// appendText writes a text as a JSON string.
func appendText(b []byte, s string) []byte {
	q, err := json.Marshal(s)
	if err != nil { // no text fails
		return append(b, `""`...)
	}
	return append(b, q...)
}

// parseEstimates reads what appendEstimates wrote. A lot of 5,000 devices has
// hundreds of thousands of numbers here, so the plain form is read directly, in a
// fraction of the time that encoding/json takes, which reads all others.
func parseEstimates(text string) (map[string]record.Value, error) {
	p := estimateParser{text: []byte(text)}
	if values := p.all(); !p.other {
		return values, nil
	}
	var values map[string]record.Value
	err := json.Unmarshal([]byte(text), &values)
	return values, err
}

// estimateParser reads the form that appendEstimates writes: no blanks, no
// escapes in names. other is set when it meets anything else.
type estimateParser struct {
	text  []byte
	i     int // next byte
	other bool
}

func (p *estimateParser) all() map[string]record.Value {
	values := map[string]record.Value{}
	p.object(func(key []byte) { values[string(key)] = p.value() })
	p.other = p.other || p.i != len(p.text)
	return values
}

func (p *estimateParser) value() (v record.Value) {
	p.object(func(key []byte) {
		start := p.i
		x := p.number()
		switch string(key) {
		case "value":
			v.Value = x
		case "u":
			v.U = x
		case "u_between":
			v.UBetween = x
		case "u_absolute":
			v.UAbsolute = x
		case "n":
			n, err := strconv.Atoi(string(p.text[start:p.i]))
			v.N, p.other = n, p.other || err != nil
		default:
			p.other = true
		}
	})
	return v
}

// object reads an object; member reads what stands behind a key and its colon.
func (p *estimateParser) object(member func(key []byte)) {
	p.expect('{')
	if p.next('}') {
		return
	}
	for !p.other {
		p.expect('"')
		n := bytes.IndexByte(p.text[p.i:], '"')
		if n < 0 {
			p.other = true
			return
		}
		key := p.text[p.i : p.i+n]
		p.other = p.other || bytes.ContainsFunc(key, isEscaped) || !utf8.Valid(key)
		p.i += n + 1
		p.expect(':')
		member(key)
		if !p.next(',') {
			break
		}
	}
	p.expect('}')
}

// isEscaped says whether JSON lets the character stand in a text only behind a
// backslash, or is the backslash (RFC 8259, section 7).
func isEscaped(r rune) bool { return r < ' ' || r == '\\' }

// next takes the byte c if it comes next.
func (p *estimateParser) next(c byte) bool {
	if p.other || p.i >= len(p.text) || p.text[p.i] != c {
		return false
	}
	p.i++
	return true
}

func (p *estimateParser) expect(c byte) {
	if !p.next(c) {
		p.other = true
	}
}

func (p *estimateParser) number() record.Num {
	if p.other {
		return record.Num{}
	}
	x, next, err := record.ParseDecimal(p.text, p.i)
	p.i, p.other = next, err != nil
	return record.Known(x)
}
