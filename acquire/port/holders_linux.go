package port

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
)

// holders names the processes that have a device open, as far as this user may see
// them; "" when none is seen.
func holders(device string) string {
	links, _ := filepath.Glob("/proc/[0-9]*/fd/*")
	var pids []int
	for _, l := range links {
		if to, err := os.Readlink(l); err != nil || to != device {
			continue
		}
		pid, err := strconv.Atoi(strings.Split(l, "/")[2])
		if err == nil && !slices.Contains(pids, pid) {
			pids = append(pids, pid)
		}
	}
	slices.Sort(pids)
	var names []string
	for _, pid := range pids {
		switch name, err := os.ReadFile(fmt.Sprintf("/proc/%d/comm", pid)); {
		case pid == os.Getpid():
			names = append(names, fmt.Sprintf("this program (process %d)", pid))
		case err != nil:
			names = append(names, fmt.Sprintf("process %d", pid))
		default:
			names = append(names, fmt.Sprintf("process %d (%s)", pid, strings.TrimSpace(string(name))))
		}
	}
	return strings.Join(names, ", ")
}
