package desk

import (
	"os"
	"path/filepath"
	"strings"
	"time"
)

// zoneName is the IANA name of a location. The system's own is called Local; its name is where the
// system keeps it, UTC where it cannot be found: times are then right, and said in UTC.
func zoneName(l *time.Location) string {
	if name := l.String(); name != "Local" && name != "" {
		return name
	}
	names := []string{strings.TrimPrefix(os.Getenv("TZ"), ":")}
	if link, err := filepath.EvalSymlinks("/etc/localtime"); err == nil {
		if _, name, ok := strings.Cut(filepath.ToSlash(link), "/zoneinfo/"); ok {
			names = append(names, name)
		}
	}
	if b, err := os.ReadFile("/etc/timezone"); err == nil {
		names = append(names, strings.TrimSpace(string(b)))
	}
	for _, n := range names {
		if n == "" || n == "Local" || filepath.IsAbs(n) {
			continue
		}
		if _, err := time.LoadLocation(n); err == nil {
			return n
		}
	}
	return "UTC"
}
