package table

import (
	"bytes"
	"fmt"
	"strings"
	"unicode/utf8"

	"golang.org/x/text/encoding"
	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/encoding/unicode"
)

// headBytes is how much of a file is looked at before the rest is read.
const headBytes = 64 << 10

// magics are the first bytes of files that are no text, with what they are and
// what to do about it.
var magics = []struct {
	magic, what, do string
}{
	{"\x1f\x8b", "a gzip-compressed file", "unpack it first"},
	{"PK\x03\x04", "a ZIP archive or a spreadsheet workbook (.xlsx, .ods)", "unpack it, or save the sheet as CSV"},
	{"PK\x05\x06", "an empty ZIP archive", "unpack it, or save the sheet as CSV"},
	{"\xfd7zXZ\x00", "an xz-compressed file", "unpack it first"},
	{"BZh", "a bzip2-compressed file", "unpack it first"},
	{"\x28\xb5\x2f\xfd", "a zstd-compressed file", "unpack it first"},
	{"\x04\x22\x4d\x18", "an lz4-compressed file", "unpack it first"},
	{"7z\xbc\xaf\x27\x1c", "a 7z archive", "unpack it first"},
	{"\xd0\xcf\x11\xe0", "an old spreadsheet workbook (.xls)", "save the sheet as CSV"},
	{"%PDF-", "a PDF document", "export the table as CSV"},
	{"SQLite format 3\x00", "an SQLite database", ""},
	{"\x89PNG", "a picture", ""},
	{"\xff\xd8\xff", "a picture", ""},
	{"\x7fELF", "a program", ""},
}

// checkHead refuses what is no text, from the first bytes of the file.
func (r *reader) checkHead(head []byte) error {
	for _, m := range magics {
		if !bytes.HasPrefix(head, []byte(m.magic)) {
			continue
		}
		if m.magic == "BZh" && (len(head) < 10 || string(head[4:10]) != "1AY&SY") {
			continue
		}
		e := r.refused(0, "it is %s, no text", m.what)
		e.Hint = m.do
		return e
	}
	if utf16Kind(head) != "" || strings.HasPrefix(foldOption(r.opt.Encoding), "utf16") {
		return nil
	}
	var nul, control int
	written := bytes.TrimRight(head, "\x00") // a block that was never written may end a file
	for _, c := range written {
		switch {
		case c == 0:
			nul++
		case c < ' ' && c != '\t' && c != '\n' && c != '\r' && c != '\f' && c != '\v' && c != 0x1b && c != 0x1a:
			control++
		}
	}
	if len(written) == 0 || nul > max(16, len(written)/100) || control > max(16, len(written)/20) {
		return r.refused(0, "it is a binary file, no text")
	}
	return nil
}

// utf16Kind tells UTF-16 by its byte order mark, or by the zeros that Latin
// text leaves in every second byte: "le", "be" or "".
func utf16Kind(head []byte) string {
	switch {
	case len(head) < 4:
		return ""
	case head[0] == 0xff && head[1] == 0xfe:
		return "le"
	case head[0] == 0xfe && head[1] == 0xff:
		return "be"
	}
	var zeros [2]int
	for i, c := range head {
		if c == 0 {
			zeros[i&1]++
		}
	}
	half := len(head) / 2
	switch {
	case zeros[1] > half*7/10 && zeros[0] <= half/20:
		return "le"
	case zeros[0] > half*7/10 && zeros[1] <= half/20:
		return "be"
	}
	return ""
}

// decode gives the text as UTF-8 without byte order mark, and the name of the
// encoding it was in.
func (r *reader) decode(raw []byte) ([]byte, string, error) {
	want := foldOption(r.opt.Encoding)
	kind := utf16Kind(raw[:min(len(raw), headBytes)])
	switch want {
	case "", "utf8", "windows1252", "cp1252", "latin1", "iso88591":
	case "utf16", "utf16le", "utf16be":
		if kind == "" {
			kind = "le"
		}
		if len(want) > 5 {
			kind = want[5:]
		}
	default:
		return nil, "", r.refused(0, "encoding %q is not known: utf-8, utf-16 or windows-1252", r.opt.Encoding)
	}
	switch {
	case kind != "" && (want == "" || strings.HasPrefix(want, "utf16")):
		endian, name := unicode.LittleEndian, "UTF-16 LE"
		if kind == "be" {
			endian, name = unicode.BigEndian, "UTF-16 BE"
		}
		return r.convert(raw, unicode.UTF16(endian, unicode.UseBOM).NewDecoder(), name)
	case bytes.HasPrefix(raw, []byte("\xef\xbb\xbf")):
		return raw[3:], "UTF-8 with byte order mark", nil
	case want == "utf8":
		return raw, "UTF-8", nil
	case want == "" && utf8.Valid(raw):
		return raw, "UTF-8", nil
	}
	return r.convert(raw, charmap.Windows1252.NewDecoder(), "Windows-1252")
}

func (r *reader) convert(raw []byte, d *encoding.Decoder, name string) ([]byte, string, error) {
	text, err := d.Bytes(raw)
	if err != nil {
		return nil, "", r.refused(0, "it cannot be read as %s: %v", name, err)
	}
	return bytes.TrimPrefix(text, []byte("\xef\xbb\xbf")), name, nil
}

// foldOption makes the spellings of an option alike: "UTF-8" and "utf8".
func foldOption(s string) string {
	return strings.Map(func(c rune) rune {
		switch {
		case c >= 'A' && c <= 'Z':
			return c + 'a' - 'A'
		case c == '-' || c == '_' || c == ' ':
			return -1
		}
		return c
	}, s)
}

// tooLarge says that a file is beyond the limit.
func (r *reader) tooLarge(size, limit int64) error {
	return r.refused(0, "it is too large: %s, at most %s", mebibytes(size), mebibytes(limit))
}

func mebibytes(n int64) string { return fmt.Sprintf("%.0f MiB", float64(n)/(1<<20)) }
