package desk

import (
	"testing"

	"cordwalk.example/cordwalk/app/view"
)

// The cord maps of two visits stand side by side once they are asked for, and no page that was
// left goes on working.
func TestTwoCordMapsSideBySide(t *testing.T) {
	s := newStage(t, view.Settings{})
	w := s.demo()
	s.show(view.ScreenCompare, s.id("Bramble"))
	p := w.page.(*comparePage)
	s.keys("m")
	s.until("two maps", func() bool {
		return p.maps.hosts[0] != nil && p.maps.hosts[0].chart != nil && p.maps.hosts[1].chart != nil
	})
	for i := range 2 {
		if p.maps.words[i].Words == "" || !p.maps.hosts[i].Visible() {
			t.Errorf("map %d says nothing", i)
		}
	}
	s.keys("m")
	if p.maps.opened {
		t.Error("the section stays open")
	}
	s.show(view.ScreenCaseload, s.id("Bramble"))
	if p.maps.ask != nil {
		t.Error("a page that was left goes on asking")
	}
}
