package mark

import (
	"strings"
	"sync"
	"time"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/canvas"
	"fyne.io/fyne/v2/container"

	"cordwalk.example/cordwalk/app/desk/look"
)

// tipDelay is how long the pointer rests before a tip shows (common practice).
const tipDelay = 450 * time.Millisecond

// Tips is the layer of a window on which tips are drawn. It takes no clicks.
type Tips struct {
	layer *fyne.Container
	owner fyne.CanvasObject
	timer *time.Timer
	words string
	turn  int
}

var (
	tipLayers   = map[fyne.Canvas]*Tips{}
	tipLayersMu sync.Mutex
)

// NewTips returns the layer of a window; it belongs on top of the window's content.
func NewTips(c fyne.Canvas) (*Tips, fyne.CanvasObject) {
	t := &Tips{layer: container.NewWithoutLayout()}
	tipLayersMu.Lock()
	tipLayers[c] = t
	tipLayersMu.Unlock()
	return t, t.layer
}

// ForgetTips lets go of a window's layer when the window closes.
func ForgetTips(c fyne.Canvas) {
	tipLayersMu.Lock()
	delete(tipLayers, c)
	tipLayersMu.Unlock()
}

func tipsOf(o fyne.CanvasObject) *Tips {
	c := fyne.CurrentApp().Driver().CanvasForObject(o)
	tipLayersMu.Lock()
	defer tipLayersMu.Unlock()
	return tipLayers[c]
}

// ShowTip shows words near a place of the window after the pointer has rested. The words may
// have several lines.
func ShowTip(owner fyne.CanvasObject, words string, at fyne.Position) {
	t := tipsOf(owner)
	if t == nil || words == "" {
		return
	}
	if t.owner == owner && t.words == words {
		return
	}
	t.hide()
	t.owner, t.words = owner, words
	t.turn++
	turn := t.turn
	t.timer = time.AfterFunc(tipDelay, func() {
		fyne.Do(func() {
			if t.turn == turn {
				t.draw(at)
			}
		})
	})
}

// ExplainAt shows words at once: a long press, or a key, asked for them.
func ExplainAt(owner fyne.CanvasObject, words string, at fyne.Position) {
	t := tipsOf(owner)
	if t == nil || words == "" {
		return
	}
	t.hide()
	t.owner, t.words = owner, words
	t.draw(at)
}

// HideTip hides the tip of its owner.
func HideTip(owner fyne.CanvasObject) {
	if t := tipsOf(owner); t != nil && t.owner == owner {
		t.hide()
	}
}

func (t *Tips) hide() {
	if t.timer != nil {
		t.timer.Stop()
	}
	t.turn++
	t.owner, t.words = nil, ""
	if len(t.layer.Objects) > 0 {
		t.layer.Objects = nil
		t.layer.Refresh()
	}
}

// Shown returns the words of the tip on the screen, empty for none.
func (t *Tips) Shown() string {
	if len(t.layer.Objects) == 0 {
		return ""
	}
	return t.words
}

func (t *Tips) draw(at fyne.Position) {
	size := look.Px(look.Small)
	if size < 13 {
		size = 13
	}
	pad := look.Unit
	room := t.layer.Size()
	var lines []string
	for _, l := range strings.Split(t.words, "\n") {
		lines = append(lines, Wrap(l, min(420*look.Scale(), max(120, room.Width-4*pad)), size, fyne.TextStyle{})...)
	}
	bed := canvas.NewRectangle(look.C(look.Ink))
	bed.CornerRadius = 4
	objects := []fyne.CanvasObject{bed}
	var w, y float32 = 0, pad * 0.75
	for _, l := range lines {
		text := canvas.NewText(l, look.C(look.Paper))
		text.TextSize = size
		m := text.MinSize()
		text.Move(fyne.NewPos(pad, y))
		text.Resize(m)
		objects = append(objects, text)
		w, y = max(w, m.Width), y+m.Height
	}
	box := fyne.NewSize(w+2*pad, y+pad*0.75)
	bed.Resize(box)
	pos := fyne.NewPos(at.X+12, at.Y+20)
	if pos.X+box.Width > room.Width-pad {
		pos.X = max(pad, room.Width-pad-box.Width)
	}
	if pos.Y+box.Height > room.Height-pad {
		pos.Y = max(pad, at.Y-box.Height-pad)
	}
	for _, o := range objects {
		o.Move(o.Position().Add(pos))
	}
	t.layer.Objects = objects
	t.layer.Refresh()
}

// Wrap breaks words into lines no wider than a width; a single word that is wider, such as the
// name of a folder, is broken where the width ends.
func Wrap(words string, width, size float32, style fyne.TextStyle) []string {
	var out []string
	line := ""
	for _, w := range strings.Fields(words) {
		for width > 4*size && fyne.MeasureText(w, size, style).Width > width {
			if line != "" {
				out = append(out, line)
				line = ""
			}
			r := []rune(w)
			n := len(r) - 1
			for n > 1 && fyne.MeasureText(string(r[:n]), size, style).Width > width {
				n--
			}
			out = append(out, string(r[:n]))
			w = string(r[n:])
		}
		try := w
		if line != "" {
			try = line + " " + w
		}
		if line != "" && fyne.MeasureText(try, size, style).Width > width {
			out = append(out, line)
			line = w
			continue
		}
		line = try
	}
	return append(out, line)
}
