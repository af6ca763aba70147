// Package look is how Cordwalk looks on the screen: the colours by name in light, dark and
// high contrast, the type scale, the spacing grid and the icons, as one Fyne theme.
//
// Colours are asked for by what they mean, never by what they are. Every colour that
// carries meaning repeats what a shape or a word says, and every pair that is read or told
// apart has a stated contrast that a test computes.
package look

import (
	"image/color"
	"os"
	"runtime"
	"strings"

	"fyne.io/fyne/v2"
	"fyne.io/fyne/v2/theme"

	"cordwalk.example/cordwalk/assets/fonts"
	"cordwalk.example/cordwalk/assets/icons"
)

// The colour tokens. They are theme colour names, so any widget can ask for them.
const (
	Paper    fyne.ThemeColorName = "paper"     // the ground of everything
	Raised   fyne.ThemeColorName = "raised"    // fields to write in, the focused row
	Sunk     fyne.ThemeColorName = "sunk"      // headings, the rail, what lies beside the work
	Ink      fyne.ThemeColorName = "ink"       // text and marks
	InkSoft  fyne.ThemeColorName = "ink-soft"  // second text: sources, times, units
	Line     fyne.ThemeColorName = "line"      // thin rules that only part things
	Edge     fyne.ThemeColorName = "edge"      // outlines of what can be pressed or filled in
	Focus    fyne.ThemeColorName = "focus"     // where the keys go
	FocusBed fyne.ThemeColorName = "focus-bed" // the ground of the focused cell
	Better   fyne.ThemeColorName = "better"    // nearer to normal
	Worse    fyne.ThemeColorName = "worse"     // further from normal
	Call     fyne.ThemeColorName = "call"      // call the veterinarian; used for nothing else
	CallBed  fyne.ThemeColorName = "call-bed"  // the ground under such a call
	Fill     fyne.ThemeColorName = "fill"      // the filling of a bead
	Over     fyne.ThemeColorName = "over"      // hover
)

// Mode chooses between the palettes.
type Mode string

// The modes. System follows the desktop's own light or dark.
const (
	System   Mode = "system"
	Light    Mode = "light"
	Dark     Mode = "dark"
	Contrast Mode = "contrast"
)

// Modes lists the modes in the order they are offered.
func Modes() []Mode { return []Mode{System, Light, Dark, Contrast} }

type palette map[fyne.ThemeColorName]color.NRGBA

func hex(v uint32) color.NRGBA { return color.NRGBA{uint8(v >> 16), uint8(v >> 8), uint8(v), 255} }

var palettes = map[Mode]palette{
	Light: {
		Paper: hex(0xFAF6ED), Raised: hex(0xFFFDF8), Sunk: hex(0xF1EADB), Ink: hex(0x211D17), InkSoft: hex(0x5F5748),
		Line: hex(0xDED4C1), Edge: hex(0x857A67), Focus: hex(0x5A3D9A), FocusBed: hex(0xEDE6F7),
		Better: hex(0x1B5C9E), Worse: hex(0x9E4C00), Call: hex(0xA0133F), CallBed: hex(0xF9E3E6),
		Fill: hex(0x2C6E6A), Over: hex(0xEFE6D4),
	},
	Dark: {
		Paper: hex(0x1B1916), Raised: hex(0x262320), Sunk: hex(0x141210), Ink: hex(0xF0E9DB), InkSoft: hex(0xB9AF9D),
		Line: hex(0x3A352E), Edge: hex(0x867C6B), Focus: hex(0xB8A0F0), FocusBed: hex(0x332B47),
		Better: hex(0x82B7F2), Worse: hex(0xF0A055), Call: hex(0xFF7F9E), CallBed: hex(0x4A1C29),
		Fill: hex(0x6FC2BB), Over: hex(0x312D27),
	},
	Contrast: {
		Paper: hex(0xFFFFFF), Raised: hex(0xFFFFFF), Sunk: hex(0xF0F0F0), Ink: hex(0x000000), InkSoft: hex(0x262626),
		Line: hex(0x808080), Edge: hex(0x000000), Focus: hex(0x40108A), FocusBed: hex(0xEADCFF),
		Better: hex(0x00366E), Worse: hex(0x7A3800), Call: hex(0x80002B), CallBed: hex(0xFFE4EA),
		Fill: hex(0x003C38), Over: hex(0xE4E4E4),
	},
}

// functionEnds are the two ends of the scale for function (and for probability of damage,
// which runs the same way: more is stronger). One hue, so it survives a grey print.
var functionEnds = map[Mode][2]color.NRGBA{
	Light:    {hex(0xE4EEEA), hex(0x0E4744)},
	Dark:     {hex(0x26302E), hex(0xA5E6DF)},
	Contrast: {hex(0xFFFFFF), hex(0x00302D)},
}

// Theme is Cordwalk's theme.
type Theme struct {
	Mode  Mode
	Scale float32 // of text, 0.8 to 2
}

var _ fyne.Theme = Theme{}

// New returns a theme; a scale outside 0.8 to 2 is brought to the nearer end, an unknown mode is System.
func New(mode Mode, scale float32) Theme {
	if _, known := palettes[mode]; !known {
		mode = System
	}
	return Theme{mode, min(2, max(0.8, scale))}
}

func (t Theme) resolve(v fyne.ThemeVariant) Mode {
	switch {
	case t.Mode != System:
		return t.Mode
	case v == theme.VariantDark && systemSays():
		return Dark
	}
	return Light
}

// systemSays reports whether the desktop can say light or dark. On Linux it says so over the
// session bus; without one the toolkit's guess is dark, and paper is light.
func systemSays() bool {
	return runtime.GOOS != "linux" || os.Getenv("DBUS_SESSION_BUS_ADDRESS") != "" || os.Getenv("FYNE_THEME") != ""
}

// standard maps the toolkit's colour names to tokens.
var standard = map[fyne.ThemeColorName]fyne.ThemeColorName{
	theme.ColorNameBackground: Paper, theme.ColorNameButton: Sunk, theme.ColorNameDisabledButton: Paper,
	theme.ColorNameDisabled: InkSoft, theme.ColorNameError: Worse, theme.ColorNameFocus: Focus,
	theme.ColorNameForeground: Ink, theme.ColorNameForegroundOnError: Paper, theme.ColorNameForegroundOnPrimary: Paper,
	theme.ColorNameForegroundOnSuccess: Paper, theme.ColorNameForegroundOnWarning: Paper,
	theme.ColorNameHeaderBackground: Sunk, theme.ColorNameHover: Over, theme.ColorNameHyperlink: Focus,
	theme.ColorNameInputBackground: Raised, theme.ColorNameInputBorder: Edge, theme.ColorNameMenuBackground: Raised,
	theme.ColorNameOverlayBackground: Paper, theme.ColorNamePlaceHolder: InkSoft, theme.ColorNamePressed: Line,
	theme.ColorNamePrimary: Focus, theme.ColorNameScrollBar: Edge, theme.ColorNameScrollBarBackground: Paper,
	theme.ColorNameSelection: FocusBed, theme.ColorNameSeparator: Line, theme.ColorNameSuccess: Better,
	theme.ColorNameWarning: Worse,
}

// Color returns a token's colour.
func (t Theme) Color(name fyne.ThemeColorName, v fyne.ThemeVariant) color.Color {
	p := palettes[t.resolve(v)]
	if to, ok := standard[name]; ok {
		name = to
	}
	if c, ok := p[name]; ok {
		return c
	}
	if name == theme.ColorNameShadow {
		return color.NRGBA{0, 0, 0, 24}
	}
	return p[Ink]
}

// Function returns the scale for function at x, 0 to 1.
func (t Theme) Function(x float64, v fyne.ThemeVariant) color.NRGBA {
	e := functionEnds[t.resolve(v)]
	x = min(1, max(0, x))
	mix := func(a, b uint8) uint8 { return uint8(float64(a) + (float64(b)-float64(a))*x + 0.5) }
	return color.NRGBA{mix(e[0].R, e[1].R), mix(e[0].G, e[1].G), mix(e[0].B, e[1].B), 255}
}

var (
	regular = fyne.NewStaticResource("NotoSans-Regular.ttf", fonts.Regular)
	bold    = fyne.NewStaticResource("NotoSans-Bold.ttf", fonts.Bold)
)

// Font returns the one typeface.
func (t Theme) Font(s fyne.TextStyle) fyne.Resource {
	switch {
	case s.Symbol:
		return theme.DefaultTheme().Font(s)
	case s.Bold:
		return bold
	}
	return regular
}

// Icon returns the toolkit's icon of that name, drawn by Cordwalk where it has one.
func (t Theme) Icon(n fyne.ThemeIconName) fyne.Resource {
	if own, ok := ownIcons[n]; ok {
		return Icon(own, Ink)
	}
	return theme.DefaultTheme().Icon(n)
}

var ownIcons = map[fyne.ThemeIconName]string{
	theme.IconNameSearch: "search", theme.IconNameCancel: "close", theme.IconNameConfirm: "tick",
	theme.IconNameContentAdd: "add", theme.IconNameArrowDropDown: "down", theme.IconNameArrowDropUp: "up",
	theme.IconNameNavigateBack: "left", theme.IconNameNavigateNext: "right", theme.IconNameWarning: "caution",
	theme.IconNameError: "caution", theme.IconNameVisibility: "eye",
}

// Sizes of the type scale at 100 %, in px.
const (
	Body  fyne.ThemeSizeName = "body"    // 16
	Small fyne.ThemeSizeName = "small"   // 13: sources and times only
	Head  fyne.ThemeSizeName = "head"    // 20
	Title fyne.ThemeSizeName = "title"   // 26
	Large fyne.ThemeSizeName = "numeral" // 34: what is read from a metre away
)

var typeScale = map[fyne.ThemeSizeName]float32{
	Body: 16, Small: 13, Head: 20, Title: 26, Large: 34,
	theme.SizeNameText: 16, theme.SizeNameCaptionText: 13, theme.SizeNameSubHeadingText: 20, theme.SizeNameHeadingText: 26,
	theme.SizeNameInlineIcon: 20,
}

// Size returns a size; only text and what stands in its line grow with the text scale.
func (t Theme) Size(n fyne.ThemeSizeName) float32 {
	if s, ok := typeScale[n]; ok {
		return s * t.Scale
	}
	switch n {
	case theme.SizeNamePadding:
		return 4
	case theme.SizeNameInnerPadding:
		return 8
	case theme.SizeNameInputRadius, theme.SizeNameSelectionRadius, theme.SizeNameButtonRadius,
		theme.SizeNamePopupRadius, theme.SizeNameMenuRadius, theme.SizeNameDialogRadius, theme.SizeNameCardRadius:
		return 4
	case theme.SizeNameInputBorder:
		return 2
	case theme.SizeNameScrollBar:
		return 12
	case theme.SizeNameScrollBarSmall:
		return 6
	case theme.SizeNameModalBlurRadius:
		return 0
	}
	return theme.DefaultTheme().Size(n)
}

// The spacing grid, in px.
const (
	Unit   float32 = 8  // all spacing is a multiple of it
	Target float32 = 44 // the smallest thing that can be pressed
)

func current() (Theme, fyne.ThemeVariant) {
	s := fyne.CurrentApp().Settings()
	if t, ok := s.Theme().(Theme); ok {
		return t, s.ThemeVariant()
	}
	return New(System, 1), s.ThemeVariant()
}

// C returns a token's colour in the theme in use.
func C(name fyne.ThemeColorName) color.Color {
	t, v := current()
	return t.Color(name, v)
}

// F returns the scale for function at x in the theme in use.
func F(x float64) color.NRGBA {
	t, v := current()
	return t.Function(x, v)
}

// Px returns a size of the type scale in the theme in use.
func Px(name fyne.ThemeSizeName) float32 {
	t, _ := current()
	return t.Size(name)
}

// Scale returns the text scale in use.
func Scale() float32 {
	t, _ := current()
	return t.Scale
}

// IsDark reports whether the theme in use is light on dark.
func IsDark() bool {
	t, v := current()
	return t.resolve(v) == Dark
}

// Resolved returns the palette in use: Light, Dark or Contrast.
func Resolved() Mode {
	t, v := current()
	return t.resolve(v)
}

// drawn is an icon in a token's colour. It is a resource that redraws itself when the theme changes.
type drawn struct {
	name  string
	token fyne.ThemeColorName
}

func (d drawn) Name() string {
	r, g, b, _ := C(d.token).RGBA()
	var s strings.Builder
	s.WriteString(d.name)
	for _, v := range []uint32{r, g, b} {
		const digits = "0123456789abcdef"
		s.WriteByte('-')
		s.WriteByte(digits[v>>12&15])
		s.WriteByte(digits[v>>8&15])
	}
	s.WriteString(".svg")
	return s.String()
}

func (d drawn) Content() []byte {
	b, _ := icons.SVG(d.name, C(d.token))
	return b
}

// Icon returns an icon in a token's colour; nil if there is no such icon.
func Icon(name string, token fyne.ThemeColorName) fyne.Resource {
	if _, ok := icons.SVG(name, color.Black); !ok {
		return nil
	}
	return drawn{name, token}
}
