package desk

import (
	"image/color"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/driver/desktop"
	"fyne.io/fyne/v2/widget"

	"cordwalk.example/cordwalk/app/desk/mark"
)

// catcher takes the clicks that fall beside a sheet.
type catcher struct {
	widget.BaseWidget
	inner fyne.CanvasObject
	tap   func()
}

func newCatcher(o fyne.CanvasObject, tap func()) *catcher {
	c := &catcher{inner: o, tap: tap}
	c.ExtendBaseWidget(c)
	return c
}

func (c *catcher) CreateRenderer() fyne.WidgetRenderer { return widget.NewSimpleRenderer(c.inner) }
func (c *catcher) Tapped(*fyne.PointEvent)             { c.tap() }

// tapped is something that can be pressed without looking like a button.
type tapped struct {
	catcher
}

func newTapped(o fyne.CanvasObject, tap func()) *tapped {
	t := &tapped{catcher{inner: o, tap: tap}}
	t.ExtendBaseWidget(t)
	return t
}

// HeightFor returns the height at a width.
func (t *tapped) HeightFor(width float32) float32 { return mark.HeightFor(t.inner, width) }

// Cursor shows that it can be pressed.
func (t *tapped) Cursor() desktop.Cursor { return desktop.PointerCursor }

func nrgba(r, g, b uint32, a uint8) color.NRGBA {
	return color.NRGBA{uint8(r >> 8), uint8(g >> 8), uint8(b >> 8), a}
}
