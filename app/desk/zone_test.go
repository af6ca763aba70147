package desk

import (
	"testing"
	"time"
)

func TestTheZoneHasAName(t *testing.T) {
	t.Setenv("TZ", "Europe/Berlin")
	if got := zoneName(time.Local); got != "Europe/Berlin" {
		t.Errorf("TZ names %q", got)
	}
	t.Setenv("TZ", "Nowhere/At-all")
	if _, err := time.LoadLocation(zoneName(time.Local)); err != nil {
		t.Errorf("a zone that is not there: %v", err)
	}
	if got := zoneName(time.UTC); got != "UTC" {
		t.Errorf("UTC is %q", got)
	}
}
