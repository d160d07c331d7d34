package store

import (
	"fmt"
	"net/url"
	"os"
	"path/filepath"
	"runtime"
	"strings"
)

// DefaultPath is where the store lies when nobody says otherwise: what
// GATESILL_STORE holds, else gatesill/gatesill.db in the user's data folder.
// That is $XDG_DATA_HOME, or ~/.local/share where it is unset or not absolute
// (XDG Base Directory Specification 0.8); on Windows %LocalAppData%, on macOS
// ~/Library/Application Support.
func DefaultPath() (string, error) {
	if p := os.Getenv("GATESILL_STORE"); p != "" {
		return p, nil
	}
	folder, err := dataFolder(runtime.GOOS)
	if err != nil {
		return "", fmt.Errorf("no data folder for the store: %w", err)
	}
	return filepath.Join(folder, "gatesill", "gatesill.db"), nil
}

func dataFolder(system string) (string, error) {
	switch system {
	case "windows":
		return os.UserCacheDir() // %LocalAppData%
	case "darwin", "ios":
		return os.UserConfigDir() // ~/Library/Application Support
	}
	if d := os.Getenv("XDG_DATA_HOME"); filepath.IsAbs(d) {
		return d, nil
	}
	home, err := os.UserHomeDir()
	if err != nil {
		return "", err
	}
	return filepath.Join(home, ".local", "share"), nil
}

// dsn names the file at the absolute path to the driver; every character of the
// path is data.
func dsn(path string, options url.Values) string {
	p := filepath.ToSlash(path)
	if !strings.HasPrefix(p, "/") { // a drive letter
		p = "/" + p
	}
	escaped := strings.ReplaceAll(url.PathEscape(p), "%2F", "/")
	return "file://" + escaped + "?" + options.Encode()
}
