package job

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

// spotLot makes a store with a lot of devices that were read once, with g_m.
func spotLot(t *testing.T, devices int) (*Env, *bytes.Buffer) {
	t.Helper()
	dir := t.TempDir()
	rng := rand.New(rand.NewPCG(1, 2))
	var b bytes.Buffer
	fmt.Fprintln(&b, "device,vgs_at_250mA_V,gm_at_250mA_S")
	for i := range devices {
		fmt.Fprintf(&b, "D%03d,%.3f,%.3f\n", i, 3.3+0.06*rng.NormFloat64(), 1.4*(1+0.03*rng.NormFloat64()))
	}
	file := filepath.Join(dir, "list.csv")
	require.NoError(t, os.WriteFile(file, b.Bytes(), 0o600))
	var out, talk bytes.Buffer
	env := &Env{Store: filepath.Join(dir, "s.db"), Out: &out, Err: &talk, Quiet: true, Who: "tester"}
	require.NoError(t, Import(context.Background(), env, ImportRequest{Lot: "L", Files: []string{file}}), &talk)
	out.Reset()
	return env, &out
}

// hardRequest takes longer than anyone waits.
var hardRequest = MatchRequest{Size: 5, By: []string{"vgs-idle", "gm-idle"}, Within: []string{"10mV", "2%"}}

// Interrupted, a search gives the sets that it has, locks none of them, and ends as
// interrupted.
func TestMatchInterrupted(t *testing.T) {
	hard := hardRequest
	env, out := spotLot(t, 400)
	env.JSON = true
	hard.TimeLimit, hard.Lock = record.Known(60), []string{"all"}
	// On a slow machine the search has not begun yet when the first times are up.
	for wait := 500 * time.Millisecond; out.Len() == 0 && wait < 20*time.Second; wait *= 2 {
		ctx, cancel := context.WithTimeout(context.Background(), wait)
		err := Match(ctx, env, []string{"L"}, hard)
		cancel()
		require.ErrorIs(t, err, context.DeadlineExceeded)
	}
	var got struct {
		Sets        []struct{ ID *string }
		Interrupted bool
		Bound       struct{ Kind string }
	}
	require.NoError(t, json.Unmarshal(out.Bytes(), &got), out)
	require.True(t, got.Interrupted)
	require.NotEmpty(t, got.Sets)
	for _, s := range got.Sets {
		require.Nil(t, s.ID)
	}
	require.Empty(t, SetNames(context.Background(), env))
}

// The same command numbers the sets the same, so that --lock takes those that were
// shown; a search that its time limit ended says that it may not.
func TestMatchNumbersStay(t *testing.T) {
	env, out := spotLot(t, 40)
	env.JSON = true
	type answer struct {
		Sets      []struct{ Devices []string }
		TimeEnded bool `json:"ended_by_time_limit"`
	}
	ask := func(rq MatchRequest) (got answer) {
		t.Helper()
		out.Reset()
		require.NoError(t, Match(context.Background(), env, []string{"L"}, rq))
		require.NoError(t, json.Unmarshal(out.Bytes(), &got))
		require.NotEmpty(t, got.Sets)
		return got
	}
	for _, rq := range []MatchRequest{
		{Size: 4, Within: []string{"20mV"}},
		{Size: 2, By: []string{"vgs-idle", "gm-idle"}, Within: []string{"20mV", "4%"}},
		{Size: 3},
	} {
		first := ask(rq)
		require.False(t, first.TimeEnded)
		require.Equal(t, first, ask(rq))
	}
	if os.Getenv("GATESILL_LONG") != "" { // its trade-off alone takes seconds
		env, out = spotLot(t, 120)
		env.JSON = true
		hard := hardRequest
		hard.TimeLimit = record.Known(0.2)
		require.True(t, ask(hard).TimeEnded)
	}
}

func TestRoundUp(t *testing.T) {
	for x, want := range map[float64]int{0.3: 1, 1: 1, 1.1: 2, 2.1: 5, 5: 5, 5.1: 10, 10.1: 20, 20.1: 25, 26: 50, 51: 100, 101: 200, 201: 250} {
		require.Equal(t, want, roundUp(x), x)
	}
}

func TestLockedNumbers(t *testing.T) {
	for text, want := range map[string][]int{"1,3": {1, 3}, "3,1": {3, 1}, "all": {1, 2, 3}} {
		rq := MatchRequest{Lock: splitComma(text)}
		got, err := rq.locked(3)
		require.NoError(t, err)
		require.Equal(t, want, got)
	}
	for _, text := range []string{"0", "x", "-1", "4", "1,1", "all,1", "1.5", ""} {
		rq := MatchRequest{Lock: splitComma(text)}
		_, err := rq.locked(3)
		require.Error(t, err, text)
	}
}

func splitComma(s string) (out []string) {
	for _, w := range bytes.Split([]byte(s), []byte(",")) {
		out = append(out, string(w))
	}
	return out
}
