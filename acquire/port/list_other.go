//go:build !linux && !darwin && !windows

package port

import "errors"

// list is not known here: the library would open devices to find out.
func list(string) ([]Found, error) {
	return nil, errors.New("devices cannot be listed on this system; name the line")
}
