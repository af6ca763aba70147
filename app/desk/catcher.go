package desk

import (
	"image/color"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/widget"
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

func nrgba(r, g, b uint32, a uint8) color.NRGBA {
	return color.NRGBA{uint8(r >> 8), uint8(g >> 8), uint8(b >> 8), a}
}
