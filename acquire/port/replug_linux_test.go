package port

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// An adapter that is plugged in again may be another device; its lasting name leads
// to it.
func TestKeepFollowsTheName(t *testing.T) {
	t.Parallel()
	name := filepath.Join(t.TempDir(), "usb-meter-if00")
	first, device := pty(t)
	if err := os.Symlink(device, name); err != nil {
		t.Fatal(err)
	}
	second, other := pty(t)
	first.WriteString("stale") // from before the opening
	ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
	defer cancel()
	h := &notes{}
	opens := 0
	h.opened = func(c Conn) error {
		if opens++; opens == 1 {
			first.WriteString("one")
		} else {
			second.WriteString("two")
		}
		return nil
	}
	got := ""
	h.bytes = func(c Conn, b []byte) error {
		if got += string(b); strings.HasSuffix(got, "one") {
			os.Remove(name)
			first.Close()
		}
		if strings.HasSuffix(got, "two") {
			cancel()
		}
		return nil
	}
	var whys []error
	h.lost = func(err error) {
		if whys = append(whys, err); errors.Is(err, ErrAbsent) {
			os.Symlink(other, name)
		}
	}
	err := Keep(ctx, name, Settings{}, h, Options{FirstRetry: 20 * time.Millisecond, LastRetry: 40 * time.Millisecond, Settle: 10 * time.Millisecond})
	if !errors.Is(err, context.Canceled) || got != "onetwo" {
		t.Errorf("%v: got %q", err, got)
	}
	if len(whys) < 2 || !errors.Is(whys[0], ErrLost) || !errors.Is(whys[1], ErrAbsent) {
		t.Errorf("lost: %v", whys)
	}
	for _, w := range whys {
		if !strings.Contains(w.Error(), name) {
			t.Errorf("%v does not name the line", w)
		}
	}
}
