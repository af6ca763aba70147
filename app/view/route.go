package view

import (
	"fmt"
	"strings"

	"cordwalk.example/cordwalk/exam"
)

// Screen is one of the screens.
type Screen uint8

// The screens, in the order of the rail.
const (
	ScreenCaseload Screen = iota
	ScreenExam
	ScreenCompare
	ScreenCourse
	ScreenSheet
	ScreenDevices
	ScreenPatient
	ScreenSettings
	ScreenOutcomes
	ScreenChoices
	ScreenHistory
	ScreenFirstRun
	ScreenPhrases
	screenCount
)

var screenWords = [screenCount]string{"caseload", "exam", "compare", "course", "sheet", "devices", "patient", "settings", "outcomes", "choices", "history", "first-run", "phrases"}

// String returns the screen's stable word.
func (s Screen) String() string {
	if s < screenCount {
		return screenWords[s]
	}
	return "unknown"
}

// Rail lists the screens of the left rail.
func Rail() []Screen {
	return []Screen{ScreenCaseload, ScreenExam, ScreenCompare, ScreenCourse, ScreenSheet, ScreenDevices}
}

// Route says which screen is shown, and of what. Routes are values: going back is showing
// an earlier one again.
type Route struct {
	Screen  Screen
	Patient exam.ID
	Visit   exam.ID // the exam, or the later visit of a comparison
	Other   exam.ID // the earlier visit of a comparison
}

// String returns the route as text, to be kept in the settings.
func (r Route) String() string {
	s := r.Screen.String()
	for _, id := range []exam.ID{r.Patient, r.Visit, r.Other} {
		if id.IsZero() {
			s += "/-"
		} else {
			s += "/" + id.String()
		}
	}
	for strings.HasSuffix(s, "/-") {
		s = strings.TrimSuffix(s, "/-")
	}
	return s
}

// ParseRoute is the inverse of String.
func ParseRoute(text string) (Route, error) {
	parts := strings.Split(text, "/")
	var r Route
	known := false
	for i, w := range screenWords {
		if w == parts[0] {
			r.Screen, known = Screen(i), true
		}
	}
	if !known || len(parts) > 4 {
		return Route{}, fmt.Errorf("%q names no screen", text)
	}
	ids := []*exam.ID{&r.Patient, &r.Visit, &r.Other}
	for i, p := range parts[1:] {
		if p == "-" {
			continue
		}
		id, err := exam.ParseID(p)
		if err != nil {
			return Route{}, err
		}
		*ids[i] = id
	}
	return r, nil
}

// Trail is where one has been: back and forward.
type Trail struct {
	list []Route
	at   int
}

// trailMax bounds how many steps back are kept.
const trailMax = 100

// Go adds a route behind the present one and forgets what lay forward. The same route
// twice is one.
func (t *Trail) Go(r Route) {
	if len(t.list) > 0 && t.list[t.at] == r {
		return
	}
	if len(t.list) > 0 {
		t.list = t.list[:t.at+1]
	}
	t.list = append(t.list, r)
	if len(t.list) > trailMax {
		t.list = t.list[len(t.list)-trailMax:]
	}
	t.at = len(t.list) - 1
}

// Here returns the present route, the caseload where nothing was shown yet.
func (t *Trail) Here() Route {
	if len(t.list) == 0 {
		return Route{}
	}
	return t.list[t.at]
}

// Back returns the route before, and false at the beginning.
func (t *Trail) Back() (Route, bool) {
	if t.at == 0 {
		return t.Here(), false
	}
	t.at--
	return t.list[t.at], true
}

// Forward returns the route that Back left, and false at the end.
func (t *Trail) Forward() (Route, bool) {
	if t.at+1 >= len(t.list) {
		return t.Here(), false
	}
	t.at++
	return t.list[t.at], true
}
