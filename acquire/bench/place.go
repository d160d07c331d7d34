package bench

import (
	"errors"
	"fmt"
	"strconv"
	"strings"
	"unicode/utf8"

	"github.com/pelletier/go-toml/v2"
	"github.com/pelletier/go-toml/v2/unstable"
)

// place is where something stands in a bench file, both from 1. Columns count
// characters, as editors do.
type place struct{ line, column int }

func (p place) String() string { return fmt.Sprintf("%d: column %d", p.line, p.column) }

// before tells which of two places comes first.
func (p place) before(q place) bool {
	return p.line < q.line || p.line == q.line && p.column < q.column
}

// placesOf finds where every key of a TOML text stands. A key is named by its way
// from the top, lists counted from 0: "meter[1].range[0].burden". The text has
// been decoded before, so that it holds no error.
func placesOf(text []byte) map[string]place {
	w := walker{p: new(unstable.Parser), text: text, places: map[string]place{}, lists: map[string]int{}}
	w.p.Reset(text)
	for w.p.NextExpression() {
		e := w.p.Expression()
		switch e.Kind {
		case unstable.Table, unstable.ArrayTable:
			w.prefix = w.header(e)
		case unstable.KeyValue:
			w.keyValue(w.prefix, e)
		}
	}
	return w.places
}

type walker struct {
	p      *unstable.Parser
	text   []byte
	places map[string]place
	lists  map[string]int // entries so far of each list of tables
	prefix string         // the table that is being filled
}

// header names the table that begins, and the new entry when it is one of a list.
func (w *walker) header(e *unstable.Node) string {
	name := ""
	for it := e.Key(); it.Next(); {
		name = join(name, string(it.Node().Data))
		if e.Kind == unstable.ArrayTable && it.IsLast() {
			w.lists[name]++
		}
		if n := w.lists[name]; n > 0 {
			name += "[" + strconv.Itoa(n-1) + "]"
		}
		if _, known := w.places[name]; !known {
			w.places[name] = w.at(it.Node().Raw)
		}
	}
	return name
}

// keyValue notes a key and, below it, the keys of tables written in one line.
func (w *walker) keyValue(name string, e *unstable.Node) {
	for it := e.Key(); it.Next(); {
		name = join(name, string(it.Node().Data))
		if _, known := w.places[name]; !known {
			w.places[name] = w.at(it.Node().Raw)
		}
	}
	w.value(name, e.Value())
}

func (w *walker) value(name string, v *unstable.Node) {
	switch v.Kind {
	case unstable.InlineTable:
		for it := v.Children(); it.Next(); {
			if it.Node().Kind == unstable.KeyValue {
				w.keyValue(name, it.Node())
			}
		}
	case unstable.Array:
		i := 0
		for it := v.Children(); it.Next(); {
			if it.Node().Kind != unstable.Comment {
				w.value(name+"["+strconv.Itoa(i)+"]", it.Node())
				i++
			}
		}
	}
}

func (w *walker) at(r unstable.Range) place { return placeAt(w.text, int(r.Offset)) }

func join(name, key string) string {
	if name == "" {
		return key
	}
	return name + "." + key
}

// placeAt counts lines and columns up to an offset.
func placeAt(text []byte, offset int) place {
	before := string(text[:min(offset, len(text))])
	start := strings.LastIndexByte(before, '\n') + 1
	return place{strings.Count(before, "\n") + 1, utf8.RuneCountInString(before[start:]) + 1}
}

// placeOf finds the place of a key, or of the table it is missing in.
func (b *Bench) placeOf(key string) place {
	for key != "" {
		if p, ok := b.places[key]; ok {
			return p
		}
		key = key[:max(strings.LastIndexAny(key, ".["), 0)]
	}
	return place{1, 1}
}

// decodeError puts the place of a TOML error in front.
func decodeError(text []byte, err error) error {
	position := func(row, col int) place {
		lines := strings.SplitN(string(text), "\n", row+1)
		if row < 1 || row > len(lines) {
			return place{1, 1}
		}
		line := lines[row-1]
		return place{row, utf8.RuneCountInString(line[:max(min(col-1, len(line)), 0)]) + 1}
	}
	var missing *toml.StrictMissingError
	if errors.As(err, &missing) && len(missing.Errors) > 0 {
		e := missing.Errors[0]
		return fmt.Errorf("%v: unknown key %q", position(e.Position()), strings.Join(e.Key(), "."))
	}
	var decode *toml.DecodeError
	if errors.As(err, &decode) {
		return fmt.Errorf("%v: %s", position(decode.Position()), strings.TrimPrefix(decode.Error(), "toml: "))
	}
	return fmt.Errorf("1: column 1: %w", err)
}
