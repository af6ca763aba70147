// Package icons holds Cordwalk's own icons: simple strokes on a grid of 24 units, as SVG.
// They are drawn for this project and carry no meaning without the word beside them.
package icons

import (
	"bytes"
	"embed"
	"fmt"
	"image/color"
	"io/fs"
	"strings"
)

//go:embed *.svg
var files embed.FS

// App is the program's own icon as PNG, 512 pixels wide.
//
//go:embed cordwalk.png
var App []byte

// Names lists every icon, in alphabetical order.
func Names() []string {
	found, err := fs.Glob(files, "*.svg")
	if err != nil {
		return nil
	}
	for i, f := range found {
		found[i] = strings.TrimSuffix(f, ".svg")
	}
	return found
}

// SVG returns the icon drawn in one colour (its alpha is not used), and false if there is
// no icon of that name.
func SVG(name string, ink color.Color) ([]byte, bool) {
	b, err := files.ReadFile(name + ".svg")
	if err != nil {
		return nil, false
	}
	r, g, bl, _ := ink.RGBA()
	hex := fmt.Sprintf("#%02x%02x%02x", r>>8, g>>8, bl>>8)
	return bytes.ReplaceAll(b, []byte("#000000"), []byte(hex)), true
}
