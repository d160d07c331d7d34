package meter

import (
	"bytes"
	"errors"
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
	"unicode"

	"pgregory.net/rapid"
)

// found is a frame in a stream, or an error in place of one.
type found struct {
	at    int
	frame string
	text  string
}

// scanAll feeds the stream in the chunks given and lists what was found where.
func scanAll(t interface{ Fatalf(string, ...any) }, d Decoder, chunks [][]byte) []found {
	var list []found
	var buf []byte
	base := 0
	for _, c := range chunks {
		buf = append(buf, c...)
		for {
			skip, n, rs, err := d.Scan(buf, false)
			if skip < 0 || n < 0 || skip+n > len(buf) {
				t.Fatalf("skip %d length %d of %d", skip, n, len(buf))
			}
			if n == 0 && (rs != nil || err != nil) {
				t.Fatalf("readings or error without a frame: %v %v", rs, err)
			}
			if n > 0 {
				f := found{at: base + skip, frame: string(buf[skip : skip+n]), text: fmt.Sprintf("%+v", rs)}
				if err != nil {
					f.text = err.Error()
				}
				list = append(list, f)
			}
			buf = buf[skip+n:]
			base += skip + n
			if n == 0 {
				break
			}
		}
	}
	return list
}

func cut(t *rapid.T, stream []byte) [][]byte {
	var chunks [][]byte
	for len(stream) > 0 {
		n := rapid.IntRange(1, min(len(stream), 20)).Draw(t, "chunk")
		chunks = append(chunks, stream[:n])
		stream = stream[n:]
	}
	return chunks
}

// goodFrames gives frames of the format as bytes.
func goodFrames(t testing.TB, f Format) [][]byte {
	for _, g := range samples {
		if g.format == f.Name {
			var list [][]byte
			for _, s := range g.list {
				list = append(list, s.bytes(t))
			}
			return list
		}
	}
	switch f.Name {
	case "scpi":
		return [][]byte{[]byte("+3.01200000E+00\r\n"), []byte("-1.5,2\n"), []byte("9.9E37\r")}
	case "text":
		return [][]byte{[]byte("vg=3.012, id=250.3 mA, OL\r\n"), []byte("3.012 0.25\n"), []byte("OL\r")}
	}
	t.Fatalf("no frames of %s", f.Name)
	return nil
}

// However the stream is cut, the same frames come out of it, with and without
// garbage.
func TestChunking(t *testing.T) {
	for _, f := range Formats {
		good := goodFrames(t, f)
		rapid.Check(t, func(t *rapid.T) {
			var stream []byte
			for range rapid.IntRange(1, 8).Draw(t, "pieces") {
				if rapid.Bool().Draw(t, "garbage") {
					stream = append(stream, rapid.SliceOfN(rapid.Byte(), 0, 30).Draw(t, "bytes")...)
				}
				frame := rapid.SampledFrom(good).Draw(t, "frame")
				stream = append(stream, frame[rapid.SampledFrom([]int{0, 0, 0, 5}).Draw(t, "beginning lost")%len(frame):]...)
			}
			one, _ := f.New(Options{})
			many, _ := f.New(Options{})
			want := scanAll(t, one, [][]byte{stream})
			got := scanAll(t, many, cut(t, stream))
			if fmt.Sprint(got) != fmt.Sprint(want) {
				t.Fatalf("%s: %q in pieces gives\n%v\nat once\n%v", f.Name, stream, got, want)
			}
		})
	}
}

// After garbage of any kind, or a frame that lost bytes, the second whole frame is
// read at the latest. Line formats need one terminator to come back, which the
// first frame has.
func TestResynchronises(t *testing.T) {
	const rounds = 4000
	for _, f := range Formats {
		good := goodFrames(t, f)
		rng := rand.New(rand.NewPCG(1, uint64(len(f.Name))))
		lostOne := 0
		for range rounds {
			garbage := make([]byte, rng.IntN(60))
			for i := range garbage {
				garbage[i] = byte(rng.IntN(256))
			}
			broken := good[rng.IntN(len(good))]
			garbage = append(garbage, broken[rng.IntN(len(broken)):]...)
			first, second := good[rng.IntN(len(good))], good[rng.IntN(len(good))]
			stream := append(append(bytes.Clone(garbage), first...), second...)
			_, d := decoder(t, f.Name, Options{})
			at1, at2 := len(garbage), len(garbage)+len(first)
			var have1, have2 bool
			for _, x := range scanAll(t, d, [][]byte{stream}) {
				// a line frame is whole with its CR
				have1 = have1 || x.at == at1 && strings.HasPrefix(string(first), strings.TrimRight(x.frame, "\r\n"))
				have2 = have2 || x.at == at2 && strings.HasPrefix(string(second), strings.TrimRight(x.frame, "\r\n"))
			}
			if !have2 {
				t.Fatalf("%s: second frame not found in %q", f.Name, stream)
			}
			if !have1 {
				lostOne++
			}
		}
		t.Logf("%s: first frame lost in %d of %d", f.Name, lostOne, rounds)
		if !f.Lines && lostOne > rounds/100 {
			t.Errorf("%s: first frame after garbage lost in %d of %d", f.Name, lostOne, rounds)
		}
	}
}

// What silence cut off is dropped; the rest of it is not taken for a number.
func TestQuiet(t *testing.T) {
	for _, f := range Formats {
		for _, frame := range goodFrames(t, f) {
			_, d := decoder(t, f.Name, Options{})
			// f.Lines: a frame ends at its first terminator
			body := len(bytes.TrimRight(frame, "\r\n"))
			if !f.Lines {
				body = len(frame)
			}
			for n := 1; n < body; n++ {
				skip, length, _, _ := d.Scan(frame[:n], true)
				if skip != n || length != 0 {
					t.Errorf("%s: %q after silence: skip %d, length %d", f.Name, frame[:n], skip, length)
				}
				rest := append(bytes.Clone(frame[n:]), frame...)
				list := scanAll(t, d, [][]byte{rest})
				if len(list) != 1 || list[0].at != len(frame)-n {
					t.Errorf("%s: %q after a lost beginning: %v", f.Name, rest, list)
				}
			}
		}
	}
}

func fuzzed(t *testing.T, d Decoder, data []byte, quiet bool) {
	for len(data) > 0 {
		before := bytes.Clone(data)
		skip, n, rs, err := d.Scan(data, quiet)
		if !bytes.Equal(before, data) {
			t.Fatal("the buffer was changed")
		}
		if skip < 0 || n < 0 || skip+n > len(data) {
			t.Fatalf("skip %d length %d of %d", skip, n, len(data))
		}
		if err != nil {
			if !errors.Is(err, ErrFrame) || n == 0 || rs != nil {
				t.Fatalf("%v, length %d, readings %v", err, n, rs)
			}
			if strings.IndexFunc(err.Error(), func(r rune) bool { return !unicode.IsPrint(r) || r == unicode.ReplacementChar }) >= 0 {
				t.Fatalf("error cannot be printed: %q", err.Error())
			}
		}
		if n > 0 && err == nil && len(rs) == 0 {
			t.Fatal("a frame without readings and without an error")
		}
		for i, r := range rs {
			if r.Column < 1 || (r.Value == r.Value) != (r.State == "") || r.Digit < 0 || r.State != "" && r.Digit != 0 {
				t.Fatalf("reading %d: %+v", i, r)
			}
			if r.Unit == "A" && r.Refusal("V") == "" {
				t.Fatalf("reading %d passes for a voltage: %+v", i, r)
			}
		}
		if skip+n == 0 {
			if quiet {
				t.Fatalf("%q stays after silence", data)
			}
			if len(data) > maxLine {
				t.Fatalf("%d bytes and no progress", len(data))
			}
			return
		}
		data = data[skip+n:]
	}
}

func FuzzScan(f *testing.F) {
	for i, format := range Formats {
		for _, g := range goodFrames(f, format) {
			f.Add(byte(i), g, false)
			f.Add(byte(i), append(bytes.Clone(g[1:]), g...), true)
		}
	}
	for _, s := range []string{"3,512\n", "OL;OL\n", "a=b=3\n", "- - 3\n", "1e999\n", "\xb5\xb5 3\xb5A\n", "1e-400 mV\n", "=3\n", ",,\n"} {
		f.Add(byte(len(Formats)-1), []byte(s), true)
	}
	f.Fuzz(func(t *testing.T, which byte, data []byte, quiet bool) {
		format := Formats[int(which)%len(Formats)]
		o := Options{Unit: "V,mA", Question: "READ?"}
		if which >= 128 && format.Name == "text" {
			o.Decimal = "comma"
		}
		d, err := format.New(o)
		if err != nil {
			t.Fatal(err)
		}
		fuzzed(t, d, data, quiet)
	})
}

func BenchmarkScan(b *testing.B) {
	for _, f := range Formats {
		b.Run(f.Name, func(b *testing.B) {
			good := goodFrames(b, f)
			stream := bytes.Join(good, nil)
			_, d := decoder(b, f.Name, Options{})
			rest := stream
			b.ReportAllocs()
			for b.Loop() {
				skip, n, _, err := d.Scan(rest, false)
				if err != nil {
					b.Fatal(err)
				}
				if rest = rest[skip+n:]; n == 0 || len(rest) == 0 {
					rest = stream
				}
			}
		})
	}
}
