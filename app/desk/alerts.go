package desk

import (
	"regexp"
	"strings"

	"fyne.io/fyne/v2"

	"cordwalk.example/cordwalk/app/desk/look"
	"cordwalk.example/cordwalk/app/desk/mark"
	"cordwalk.example/cordwalk/app/sheet"
	"cordwalk.example/cordwalk/app/view"
	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/alert"
)

// alertLine is one alert of the visit as the screen shows it.
type alertLine struct {
	Rule     string
	Title    string // how soon, and what it is
	Name     string // what it is
	Seen     string // what was seen
	Why      string // why it matters and what to do
	Source   string
	Answered string // who was told, empty where nobody was
	Must     bool   // has to be answered before the visit can be closed
	Unlooked bool   // abnormal before and not tested yet: cannot be ruled out
}

// alertsOf returns the alerts that a visit raises with those before it, the most urgent first.
func alertsOf(p exam.Patient, others []exam.Visit, today exam.Visit) []alertLine {
	visits := make([]exam.Visit, 0, len(others)+1)
	for _, v := range others {
		if v.ID != today.ID && !v.Examined.After(today.Examined) {
			visits = append(visits, v)
		}
	}
	flags := alert.Scan(p, append(visits, today), today.Examined)
	_, blocking := alert.MayClose(flags, today.ID)
	must := map[string]bool{}
	for _, f := range blocking {
		must[f.Rule+f.Seen] = true
	}
	var out []alertLine
	for _, f := range flags {
		name := view.AlertTitle(f.Rule)
		l := alertLine{Rule: f.Rule, Name: name, Title: view.UrgencyWords(f.Urgency.String()) + " " + name, Seen: seenWords(f.Seen), Why: said(f.Why) + " " + said(f.Do),
			Source: f.Source, Must: must[f.Rule+f.Seen], Unlooked: f.CannotRuleOut}
		if f.Answered != nil {
			l.Answered = words.T("told: %s", f.Answered.Told)
		}
		out = append(out, l)
	}
	return out
}

// said puts a sentence of the engines into the language in use.
func said(english string) string { return sheet.Say("", english) }

// seenPlace finds the cell that a part of what an alert saw begins with: an item's and a site's key.
var seenPlace = regexp.MustCompile(`^([a-z-]+)(?: at ([a-z-]+))?(:| was )`)

// seenWords says what an alert saw by the names that the screen uses.
func seenWords(seen string) string {
	parts := strings.Split(seen, "; ")
	for i, p := range parts {
		if s := said(p); s != p {
			parts[i] = s
			continue
		}
		m := seenPlace.FindStringSubmatch(p)
		if m == nil {
			continue
		}
		item, err := exam.ParseItem(m[1])
		if err != nil {
			continue
		}
		k := exam.Key{Item: item}
		if m[2] != "" {
			if k.Site, err = exam.ParseSite(m[2]); err != nil {
				continue
			}
		}
		parts[i] = view.CellName(k) + m[3] + p[len(m[0]):]
	}
	return strings.Join(parts, "; ")
}

// alertBox shows one alert: how soon, what was seen, and what can be done.
func alertBox(a alertLine, answer, why func()) fyne.CanvasObject {
	lines := mark.Column(2, mark.NewPara(a.Title).Strong().In(look.Call), mark.NewPara(inShort(a.Seen)))
	if a.Answered != "" {
		lines.Add(mark.NewPara(a.Answered).In(look.InkSoft))
	}
	if look.Scale() > 1.3 { // a button's words stand on one line; these take as many as they need
		if a.Answered == "" {
			lines.Add(framed(words.T("Who was told?"), answer))
		}
		lines.Add(framed(words.T("Why, and what to do"), why))
		return mark.On(look.CallBed, false, mark.Pad(look.Unit, look.Unit, lines))
	}
	buttons := []fyne.CanvasObject{mark.NewButton(words.T("Why, and what to do"), "", why).As(mark.Quiet)}
	if a.Answered == "" {
		buttons = append([]fyne.CanvasObject{mark.NewButton(words.T("Who was told?"), "phone", answer)}, buttons...)
	}
	lines.Add(mark.Wrapped(look.Unit/2, buttons...))
	return mark.On(look.CallBed, false, mark.Pad(look.Unit, look.Unit, mark.RowTop(look.Unit, []float32{0, 1}, mark.Column(0, iconImage("phone", look.Call, 22)), lines)))
}

// framed is a button whose words may take several lines.
func framed(text string, tap func()) fyne.CanvasObject {
	return newPressable(mark.On(look.Raised, true, mark.Pad(look.Unit/2, look.Unit, mark.NewPara(text))), "", tap)
}

// inShort keeps the first things that were seen; the rest is one press away.
func inShort(seen string) string {
	const most = 120
	parts := strings.Split(seen, "; ")
	out := parts[0]
	for i, p := range parts[1:] {
		if len(out)+len(p) > most {
			return words.N(len(parts)-1-i, "%s; and %d more", "%s; and %d more", out, len(parts)-1-i)
		}
		out += "; " + p
	}
	return out
}
