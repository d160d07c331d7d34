package report

import (
	"bytes"
	"encoding/json"
	"math"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestMeters(t *testing.T) {
	yes := true
	rows := []MeterRow{
		{Role: "gate", Name: "handheld 1", Line: "/dev/serial/by-id/usb-lead-1", Value: 3.012, Unit: "V", Text: "3.012 V", State: "ok", Readings: 9, Rate: 3.33, Age: 0.21, Isolated: &yes},
		{Role: "current", Name: "odd\x1b[2J", Line: "tcp:x", Value: math.NaN(), Rate: math.NaN(), Age: math.NaN(), State: "nothing yet", Error: "no answer", Due: "2020-01-01", Overdue: true},
	}
	var b bytes.Buffer
	require.NoError(t, MetersTable(&b, rows, Style{Width: 80}))
	require.Contains(t, b.String(), "3.012 V")
	require.NotContains(t, b.String(), "\x1b")
	for _, l := range strings.Split(b.String(), "\n") {
		require.LessOrEqual(t, len(l), 80, l)
	}
	b.Reset()
	require.NoError(t, MetersJSON(&b, rows))
	lines := strings.Split(strings.TrimSpace(b.String()), "\n")
	require.Len(t, lines, 2)
	var first, second map[string]any
	require.NoError(t, json.Unmarshal([]byte(lines[0]), &first))
	require.NoError(t, json.Unmarshal([]byte(lines[1]), &second))
	require.Equal(t, 3.012, first["value"])
	require.Equal(t, 1.0, first["schema"])
	require.Nil(t, second["value"])
	require.Nil(t, second["isolated"])
	require.Equal(t, true, second["overdue"])
}

func TestPorts(t *testing.T) {
	rows := []PortRow{
		{Line: "/dev/serial/by-id/usb-lead-1", Device: "/dev/ttyUSB0", Kind: "serial"},
		{Line: "/dev/serial/by-path/pci-1", Device: "/dev/ttyUSB1", Kind: "serial", Access: "group dialout: sudo usermod -aG dialout NAME", Shared: true},
	}
	var b bytes.Buffer
	require.NoError(t, PortsTable(&b, rows, Style{Width: 80}))
	require.Contains(t, b.String(), "usermod -aG dialout")
	require.Contains(t, b.String(), "leave it there")
	b.Reset()
	require.NoError(t, PortsJSON(&b, rows))
	require.Equal(t, 2, strings.Count(b.String(), "\n"))
	require.Contains(t, b.String(), `"no_access":null`)
}
