//go:build unix

package port

import (
	"os"
	"os/user"
	"slices"
	"strconv"
	"syscall"
)

func ownershipOf(device string) ownership {
	var o ownership
	st, err := os.Stat(device)
	if err != nil {
		return o
	}
	sys, ok := st.Sys().(*syscall.Stat_t)
	if !ok {
		return o
	}
	gid := strconv.Itoa(int(sys.Gid))
	o.group = gid
	if g, err := user.LookupGroupId(gid); err == nil {
		o.group = g.Name
	}
	active, _ := os.Getgroups()
	o.active = slices.Contains(append(active, os.Getegid()), int(sys.Gid))
	if u, err := user.Current(); err == nil {
		ids, _ := u.GroupIds()
		o.member = slices.Contains(ids, gid)
	}
	return o
}
