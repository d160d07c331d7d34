package replay

import "testing"

func TestWhatNotesSay(t *testing.T) {
	for _, c := range []struct {
		text, current, in string
		out, unclear      bool
	}{
		{"device B in socket", "", "B", false, false},
		{"D07 in", "", "D07", false, false},
		{"removed", "D07", "", true, false},
		{"D07 removed", "D07", "", true, false},
		{"Bauteil 7 drin", "", "7", false, false},
		{"Bauteil Nr. 7 eingesetzt", "", "7", false, false},
		{"start D3", "", "D3", false, false},
		{"part #12 in", "", "12", false, false},
		{"#12", "", "12", false, false},
		{"D7", "", "D7", false, false},
		{"B", "A", "B", false, false},
		{"7", "", "7", false, false},
		{"D7 out, D8 in", "D7", "D8", true, false},
		{"D7 out and D8 in", "D7", "D8", true, false},
		{"swap to D8", "D7", "D8", false, false},
		{"next: D8", "D7", "D8", false, false},
		{"device Red-1 inserted", "", "Red-1", false, false},
		{"device Blue in", "", "Blue", false, false},
		{"taken out of the socket", "D7", "", true, false},
		{"socket empty", "D7", "", true, false},
		{"end", "D7", "", true, false},
		{"coffee break", "D7", "", false, false},
		{"supply at 12 V", "", "", false, false},
		{"room is 23C", "", "", false, false},
		{"start", "", "", false, false},
		{"D7 looks hot", "D7", "", false, false},
		{"D7 sweep up", "D7", "", false, false},
		{"D8 looks hot", "D7", "", false, true},
		{"D7 or D8 in", "", "", false, true},
		{"device in socket", "", "", false, true},
		{"device D7 D8", "", "", false, true},
		{"in socket", "", "", false, true},
		{"", "", "", false, false},
	} {
		in, out, why := readNote(c.text, c.current)
		if in != c.in || out != c.out || (why != "") != c.unclear {
			t.Errorf("%q with %q in: in %q, out %v, unclear %q; want %q %v %v", c.text, c.current, in, out, why, c.in, c.out, c.unclear)
		}
	}
}

func TestTimesAreCutOffNotes(t *testing.T) {
	for _, c := range []struct{ line, time, text string }{
		{"10:02:03 device B in socket", "10:02:03", "device B in socket"},
		{"10:02 D7", "10:02", "D7"},
		{"2026-05-20T10:02:03+02:00 D07 in", "2026-05-20T10:02:03+02:00", "D07 in"},
		{"2026-05-20 10:02:03 D07 in", "2026-05-20 10:02:03", "D07 in"},
		{"2026-05-20 10:02:03 +02:00 D07 in", "2026-05-20 10:02:03 +02:00", "D07 in"},
		{"10:02:03 PM D07 in", "10:02:03 PM", "D07 in"},
		{"10:02:03.5;D07 in", "10:02:03.5", "D07 in"},
		{"10:02:03,D07 in", "10:02:03", "D07 in"},
		{"\"10:02:03\",\"D07 in\"", "10:02:03", "D07 in"},
		{"[10:02:03] D07 in", "10:02:03", "D07 in"},
		{"1779264123456 D07 in", "1779264123456", "D07 in"},
		{"12.5 removed", "12.5", "removed"},
		{"20.05.2026 10:02:03 - D07 in", "20.05.2026 10:02:03", "D07 in"},
		{"D07 in", "", "D07 in"},
		{"10:02:03", "10:02:03", ""},
	} {
		time, text := cutTime(c.line)
		if time != c.time || text != c.text {
			t.Errorf("%q: %q, %q; want %q, %q", c.line, time, text, c.time, c.text)
		}
	}
}
