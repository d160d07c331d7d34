package table

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gatesill/store/record"
)

func TestFilesThatAreNoTables(t *testing.T) {
	dir := t.TempDir()
	write := func(name, text string) string {
		p := filepath.Join(dir, name)
		if err := os.WriteFile(p, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return p
	}
	for _, c := range []struct{ name, path, words, hint string }{
		{"folder", dir, "it is a folder", ""},
		{"absent", filepath.Join(dir, "nowhere.csv"), "there is no such file", ""},
		{"empty", write("empty.csv", ""), "it is empty", "save the readings anew"},
		{"gzip", write("a.csv.gz", "\x1f\x8b\x08\x00abcdef"), "gzip", "unpack"},
		{"zip", write("a.xlsx", "PK\x03\x04abcdef"), "spreadsheet", "save the sheet as CSV"},
		{"xz", write("a.xz", "\xfd7zXZ\x00abc"), "xz", "unpack"},
		{"bzip2", write("a.bz2", "BZh91AY&SYabc"), "bzip2", "unpack"},
		{"zstd", write("a.zst", "\x28\xb5\x2f\xfdabc"), "zstd", "unpack"},
		{"old workbook", write("a.xls", "\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1abc"), "workbook", "save the sheet as CSV"},
		{"pdf", write("a.pdf", "%PDF-1.7\n"), "PDF", "export"},
		{"binary", write("a.bin", strings.Repeat("\x01\x02\x03\x04\x80\xff", 100)), "binary", ""},
		{"zeros", write("zeros.csv", strings.Repeat("\x00", 1000)), "binary", ""},
		{"only comments", write("c.csv", "# nothing\n# here\n"), "no rows", ""},
		{"only a header", write("h.csv", "device,vg_V,id_A\n"), "no rows", ""},
		{"only blank lines", write("b.csv", "\n\n \n"), "no rows", ""},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := ReadFile(c.path, Options{})
			var e *Error
			if !errors.As(err, &e) || !errors.Is(err, ErrRefused) {
				t.Fatalf("%v", err)
			}
			if !strings.Contains(err.Error(), c.words) || !strings.Contains(e.Hint, c.hint) || e.File != c.path {
				t.Errorf("%v, hint %q", err, e.Hint)
			}
		})
	}
	if _, err := ReadFile(filepath.Join(dir, "nowhere.csv"), Options{}); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("%v does not wrap the file system's error", err)
	}
}

func TestBZhIsAlsoAName(t *testing.T) {
	checkShow(t, mustRead(t, "x.csv", "BZh,vgs_at_10mA_V\n1,2\n2,3\n", Options{Map: map[string]string{"device": "1"}}), "1 spot vg_v[2] id_a[10e-3]\n2 spot vg_v[3] id_a[10e-3]")
}

func TestLimitOfSize(t *testing.T) {
	text := talkBody + strings.Repeat("D1,4,0.3\n", 20000)
	_, err := Read("x.csv", strings.NewReader(text), Options{MaxBytes: 100000})
	if !errors.Is(err, ErrRefused) || !strings.Contains(err.Error(), "too large") {
		t.Error(err)
	}
	p := filepath.Join(t.TempDir(), "x.csv")
	if err := os.WriteFile(p, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err = ReadFile(p, Options{MaxBytes: 100000}); !errors.Is(err, ErrRefused) || !strings.Contains(err.Error(), "too large") {
		t.Error(err)
	}
	if _, err = ReadFile(p, Options{MaxBytes: int64(len(text))}); err != nil {
		t.Error(err)
	}
}

type brokenReader struct{}

func (brokenReader) Read([]byte) (int, error) { return 0, errors.New("cable pulled") }

func TestErrorOfTheReaderIsKept(t *testing.T) {
	_, err := Read("x.csv", io.MultiReader(strings.NewReader(strings.Repeat("x", headBytes)), brokenReader{}), Options{})
	if err == nil || !strings.Contains(err.Error(), "cable pulled") {
		t.Error(err)
	}
}

func TestHashAndSize(t *testing.T) {
	f := mustRead(t, "dir/x.csv", talkBody, Options{})
	const want = "2e97100fd6059ff9a74f4b522aa92fbbd30d424360cacfa87192779313713b65" // sha256sum of the same bytes
	if f.Name != "x.csv" || f.Size != int64(len(talkBody)) || f.Hash != want {
		t.Errorf("%s %d %s", f.Name, f.Size, f.Hash)
	}
	g := mustRead(t, "y.csv", talkBody+"\n", Options{})
	if g.Hash == f.Hash || g.Sweeps[0].DataHash != f.Sweeps[0].DataHash {
		t.Error("the file hash must differ, the data hash must not")
	}
}

func TestProgressReachesTheEnd(t *testing.T) {
	text := talkBody + strings.Repeat("D2,4,0.3\n", 300000)
	var last, total int64
	calls := 0
	mustRead(t, "x.csv", text, Options{Progress: func(d, n int64) {
		if d < last {
			t.Errorf("progress went back from %d to %d", last, d)
		}
		last, total = d, n
		calls++
	}})
	if last != total || total != int64(len(text)) || calls < 2 {
		t.Errorf("%d of %d in %d calls", last, total, calls)
	}
}

func TestRefusals(t *testing.T) {
	text := "device,vg_V,id_A\n"
	for i := range 100 {
		switch {
		case i%8 == 3:
			text += fmt.Sprintf("D1,%d,bad%d\n", i, i)
		default:
			text += fmt.Sprintf("D1,%d,0.1\n", i)
		}
	}
	f := mustRead(t, "x.csv", text, Options{})
	if f.Rows != 100 || f.Refused != 13 || len(f.Refusals) != 10 || f.Points != 87 {
		t.Errorf("%d rows, %d refused, %d kept, %d points", f.Rows, f.Refused, len(f.Refusals), f.Points)
	}
	if r := f.Refusals[0]; r.Line != 5 || r.Reason != `id "bad3" is no number` || r.Text != "D1,3,bad3" {
		t.Errorf("%+v", r)
	}
	_, err := Read("x.csv", strings.NewReader(text), Options{Strict: true})
	if !errors.Is(err, ErrTooMany) {
		t.Errorf("strict: %v", err)
	}
	f = mustRead(t, "x.csv", talkBody, Options{Strict: true})
	if f.Refused != 0 {
		t.Error("strict refuses good rows")
	}
}

// A fifth of the rows may be refused, more not.
func TestTooManyRefused(t *testing.T) {
	good, bad := "D1,2,0.1\n", "D1,x,0.1\n"
	head := "device,vg_V,id_A\n"
	mustRead(t, "x.csv", head+strings.Repeat(good, 4)+bad, Options{})
	f, err := Read("x.csv", strings.NewReader(head+strings.Repeat(good, 7)+bad+bad), Options{})
	if !errors.Is(err, ErrTooMany) || !strings.Contains(err.Error(), `2 of 9 rows refused: line 9: vg "x" is no number; line 10`) {
		t.Errorf("%v", err)
	}
	if f == nil || f.Refused != 2 || len(f.Refusals) != 2 {
		t.Errorf("the file is returned with its refusals: %+v", f)
	}
}

func TestBadNamesRefuseTheirRows(t *testing.T) {
	text := "device,vgs_at_10mA_V\n"
	for i := range 20 {
		text += fmt.Sprintf("D%d,2\n", i)
	}
	text += "\x1b[31mred,2\nzero\u200bwidth,2\n,2\n" + strings.Repeat("n", 300) + ",2\n"
	f := mustRead(t, "x.csv", text, Options{})
	if f.Refused != 4 || len(f.Sweeps) != 20 {
		t.Fatalf("%+v", f.Refusals)
	}
	for i, words := range []string{`"\x1b[31mred" has the control character U+001B`, "U+200B", "device name is empty", "300 bytes long"} {
		if r := f.Refusals[i]; !strings.Contains(r.Reason, words) || r.Line != 22+i || strings.Contains(r.Reason, "\x1b") {
			t.Errorf("%+v, want %q", r, words)
		}
	}
}

func TestBadSideAndLotRefuseTheirRows(t *testing.T) {
	text := "device,side,lot,vg_V,id_A\n" + strings.Repeat("D1,A,L,2,0.1\n", 20) + "D1,C,L,2,0.1\nD1,A,\x07,2,0.1\n"
	f := mustRead(t, "x.csv", text, Options{})
	if f.Refused != 2 || !strings.Contains(f.Refusals[0].Reason, "side C is neither A nor B") || !strings.Contains(f.Refusals[1].Reason, "lot name") {
		t.Errorf("%+v", f.Refusals)
	}
}

func TestShortAndLongRows(t *testing.T) {
	text := "device,vg_V,id_A,x\n" + strings.Repeat("D1,2,0.1,7\n", 20) + "D1,2\nD1,2,0.1\nD1,2,0.1,7,,\nD1,2,0.1,7,8\n"
	f := mustRead(t, "x.csv", text, Options{})
	// The third cell is the last that is read; the row that is cut off behind it
	// says all that is asked. More cells than the header are a broken row.
	if f.Refused != 2 || f.Refusals[0].Line != 22 || f.Refusals[0].Reason != "the row has 2 cells, want 3" || f.Refusals[1].Line != 25 {
		t.Errorf("%+v", f.Refusals)
	}
}

func TestSameRowsUnderTwoNames(t *testing.T) {
	block := func(d string) string {
		s := ""
		for i := range 6 {
			s += fmt.Sprintf("%s,%d,0.%d\n", d, i, i*i)
		}
		return s
	}
	head := "device,vg_V,id_A\n"
	f := mustRead(t, "x.csv", head+block("D1")+block("D2"), Options{})
	if !hasRemark(f, CodeSameRows, "D1 (line 2 on) and D2 (line 8 on) have the same 6 rows") {
		t.Errorf("%+v", f.Remarks)
	}
	f = mustRead(t, "x.csv", head+block("D1")+"D3,0,0\nD3,1,0.1\n"+block("D1"), Options{})
	if hasRemark(f, CodeSameRows, "") {
		t.Errorf("one device twice is no copy: %+v", f.Remarks)
	}
	// Dead devices on a driven gate read alike, and so do spots by chance.
	dead := strings.Repeat("D1,1,0\nD1,2,0\nD1,3,0\nD1,4,0\nD1,5,0\n", 1)
	f = mustRead(t, "x.csv", head+dead+strings.ReplaceAll(dead, "D1", "D2"), Options{})
	if hasRemark(f, CodeSameRows, "") {
		t.Errorf("%+v", f.Remarks)
	}
	f = mustRead(t, "x.csv", "part,vgs_at_10mA_V\n1,2.82\n2,2.82\n", Options{})
	if hasRemark(f, CodeSameRows, "") {
		t.Errorf("%+v", f.Remarks)
	}
}

func TestDialectIsTold(t *testing.T) {
	f := mustRead(t, "x.csv", "# by hand\nPrüfling;Foo;U_GS [V];I_D [mA];Farbe\nA;1;2,0;1,0;rot\nA;1;3,0;2,0;rot\nA;1;4,0;3,0;rot\n", Options{})
	d := f.Dialect
	if d.Header != 2 || d.UnitLine != 0 || d.Comments != 1 || d.Delimiter != "semicolon" || d.Decimal != "comma" || d.Encoding != "UTF-8" {
		t.Errorf("%+v", d)
	}
	want := []ColumnFound{
		{1, "Prüfling", "device", "", "header"}, {2, "Foo", "ignore", "", "header"}, {3, "U_GS [V]", "vg", "V", "header"},
		{4, "I_D [mA]", "id", "mA", "header"}, {5, "Farbe", "ignore", "", "header"},
	}
	if fmt.Sprint(d.Columns) != fmt.Sprint(want) {
		t.Errorf("%+v", d.Columns)
	}
	if !hasNote(f, `column 2 "Foo" is not used`) {
		t.Errorf("%q", d.Notes)
	}
	f = mustRead(t, "x.csv", "dut,vgs_at_10mA_V\nA,2", Options{})
	if !hasNote(f, "no line end") {
		t.Errorf("%q", f.Dialect.Notes)
	}
}

func TestCurrentsOfSpotsWithTheirConditions(t *testing.T) {
	f := mustRead(t, "x.csv", "device,vgs_V,id_mA\nA,2.5,10.1\nB,2.6,9.9\n", Options{})
	if f.Layout != "spot" || f.Sweeps[0].Condition.SpotCurrent != record.Known(10.1e-3) || f.Sweeps[1].Condition.SpotCurrent != record.Known(9.9e-3) {
		t.Errorf("%s %+v", f.Layout, f.Sweeps)
	}
}

func TestCutOffFilesAreTold(t *testing.T) {
	f := mustRead(t, "x.csv", "device,vg_V,id_A\nD1,2,0.11\nD1,3,0.22\nD1,4,0.33\nD1,5,0.4", Options{})
	if !hasRemark(f, CodeCutOff, "fewer decimals") {
		t.Errorf("%+v", f.Remarks)
	}
	f = mustRead(t, "x.csv", "device,vg_V,id_A\nD1,2,0.11\nD1,3,0.22\nD1,4,0.33\nD1,5,0.44", Options{})
	if hasRemark(f, CodeCutOff, "") {
		t.Errorf("%+v", f.Remarks)
	}
	f = mustRead(t, "x.csv", talkBody+strings.Repeat("\x00", 512), Options{})
	if !hasRemark(f, CodeCutOff, "512 zeros") {
		t.Errorf("%+v", f.Remarks)
	}
}
