// Package picture checks photos and clips before they are kept: the format by its bytes and not by its
// name, the size, and what in them could say where or by whom they were taken. Photos lose all metadata
// but the way up; clips lose their descriptions and their tracks of positions. Nothing is compressed
// anew: the picture itself stays as the camera made it. The package also makes small pictures to look at.
package picture

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"image"
	"image/jpeg"
	"image/png"
	"io"

	"golang.org/x/image/draw"

	"cordwalk.example/cordwalk/exam"
)

// Errors of Clean.
var (
	ErrFormat = errors.New("this is no JPEG or PNG photo and no MP4, MOV or WebM clip")
	ErrHEIC   = errors.New("this is a HEIC photo; set the camera to JPEG, or save the photo as JPEG first")
	ErrLarge  = errors.New("the file is too large: a photo may have 25 MB, a clip 200 MB")
	ErrBroken = errors.New("the file is damaged or cut short")
)

// maxPixels bounds what is decoded for a small picture.
const maxPixels = 200_000_000

// Format tells the format of a file from its first bytes; empty where it is none that is taken.
func Format(head []byte) string {
	switch {
	case bytes.HasPrefix(head, []byte{0xff, 0xd8, 0xff}):
		return "jpeg"
	case bytes.HasPrefix(head, []byte("\x89PNG\r\n\x1a\n")):
		return "png"
	case len(head) >= 12 && string(head[4:8]) == "ftyp":
		switch string(head[8:12]) {
		case "heic", "heix", "hevc", "mif1", "msf1", "avif", "avis":
			return "heic"
		case "qt  ":
			return "mov"
		}
		return "mp4"
	case bytes.HasPrefix(head, []byte{0x1a, 0x45, 0xdf, 0xa3}):
		if bytes.Contains(head[:min(len(head), 64)], []byte("webm")) {
			return "webm"
		}
	}
	return ""
}

// Cleaned is a file that may be kept.
type Cleaned struct {
	Format string
	Size   int64 // bytes that Reader gives
	Reader io.Reader
}

// Clean checks a file of a size and returns what may be kept of it. The Reader reads r.
func Clean(r io.ReaderAt, size int64) (Cleaned, error) {
	head := make([]byte, min(size, 64))
	if _, err := r.ReadAt(head, 0); err != nil && !errors.Is(err, io.EOF) {
		return Cleaned{}, fmt.Errorf("reading the file: %w", err)
	}
	f := Format(head)
	switch f {
	case "":
		return Cleaned{}, ErrFormat
	case "heic":
		return Cleaned{}, ErrHEIC
	case "jpeg", "png":
		if size > exam.MaxPhoto {
			return Cleaned{}, ErrLarge
		}
		data := make([]byte, size)
		if _, err := io.ReadFull(io.NewSectionReader(r, 0, size), data); err != nil {
			return Cleaned{}, fmt.Errorf("reading the file: %w", err)
		}
		clean, config := cleanJPEG, jpeg.DecodeConfig
		if f == "png" {
			clean, config = cleanPNG, png.DecodeConfig
		}
		out, err := clean(data)
		if err != nil {
			return Cleaned{}, err
		}
		if _, err := config(bytes.NewReader(out)); err != nil {
			return Cleaned{}, fmt.Errorf("%w: %w", ErrBroken, err)
		}
		return Cleaned{f, int64(len(out)), bytes.NewReader(out)}, nil
	}
	if size > exam.MaxClip {
		return Cleaned{}, ErrLarge
	}
	wipe := wipeBoxes
	if f == "webm" {
		wipe = wipeTags
	}
	p := &patched{r: io.NewSectionReader(r, 0, size)}
	if err := wipe(r, size, p); err != nil {
		return Cleaned{}, err
	}
	p.settle()
	return Cleaned{f, size, p}, nil
}

// cleanJPEG keeps what a decoder needs, and of the Exif data the way up alone. What follows the end of the
// picture (previews, moving pictures, their places) is left off. (ITU-T T.81 Annex B; Exif 2.3.)
func cleanJPEG(b []byte) ([]byte, error) {
	out := append(make([]byte, 0, len(b)), 0xff, 0xd8)
	at, up, told := 2, 1, false
	for {
		if at+2 > len(b) || b[at] != 0xff {
			return nil, ErrBroken
		}
		m := b[at+1]
		switch {
		case m == 0xff: // filling
			at++
			continue
		case m == 0xd9:
			return append(out, 0xff, 0xd9), nil
		case m == 0x01 || m >= 0xd0 && m <= 0xd7:
			out = append(out, b[at:at+2]...)
			at += 2
			continue
		}
		if at+4 > len(b) {
			return nil, ErrBroken
		}
		n := int(binary.BigEndian.Uint16(b[at+2:]))
		end := at + 2 + n
		if n < 2 || end > len(b) {
			return nil, ErrBroken
		}
		segment := b[at:end]
		at = end
		switch {
		case m == 0xe1:
			if o := orientation(segment[4:]); o > 1 {
				up = o
			}
			continue
		case m == 0xe0 || m == 0xe2 && bytes.HasPrefix(segment[4:], []byte("ICC_PROFILE\x00")) || m == 0xee:
		case m >= 0xe0 && m <= 0xef || m == 0xfe:
			continue
		case !told && up > 1:
			out, told = append(out, uprightExif(up)...), true
		}
		out = append(out, segment...)
		if m != 0xda {
			continue
		}
		// The picture's own bytes: up to the next marker that is neither a stuffed byte nor a restart.
		start := at
		for at+1 < len(b) && (b[at] != 0xff || b[at+1] == 0 || b[at+1] >= 0xd0 && b[at+1] <= 0xd7 || b[at+1] == 0xff) {
			at++
		}
		out = append(out, b[start:at]...)
	}
}

// orientation reads tag 0x0112 of an Exif segment: 1 to 8, 0 where it is not there.
func orientation(b []byte) int {
	b, ok := bytes.CutPrefix(b, []byte("Exif\x00\x00"))
	if !ok || len(b) < 8 {
		return 0
	}
	var order binary.ByteOrder = binary.BigEndian
	if b[0] == 'I' {
		order = binary.LittleEndian
	}
	ifd := int64(order.Uint32(b[4:]))
	if ifd < 8 || ifd+2 > int64(len(b)) {
		return 0
	}
	n := int64(order.Uint16(b[ifd:]))
	for i := range n {
		e := ifd + 2 + 12*i
		if e+12 > int64(len(b)) {
			return 0
		}
		if order.Uint16(b[e:]) == 0x0112 {
			if o := int(order.Uint16(b[e+8:])); o >= 1 && o <= 8 {
				return o
			}
			return 0
		}
	}
	return 0
}

// uprightExif is an Exif segment that says the way up and nothing else.
func uprightExif(o int) []byte {
	return []byte{0xff, 0xe1, 0, 34, 'E', 'x', 'i', 'f', 0, 0, 'M', 'M', 0, 42, 0, 0, 0, 8, 0, 1,
		0x01, 0x12, 0, 3, 0, 0, 0, 1, 0, byte(o), 0, 0, 0, 0, 0, 0}
}

// keptChunks of a PNG file: what its picture needs (W3C PNG, third edition).
var keptChunks = map[string]bool{"IHDR": true, "PLTE": true, "IDAT": true, "IEND": true, "tRNS": true, "gAMA": true, "cHRM": true,
	"sRGB": true, "iCCP": true, "cICP": true, "sBIT": true, "bKGD": true, "pHYs": true}

func cleanPNG(b []byte) ([]byte, error) {
	out := append(make([]byte, 0, len(b)), b[:8]...)
	for at := 8; at+12 <= len(b); {
		n := int64(binary.BigEndian.Uint32(b[at:]))
		end := int64(at) + 12 + n
		if end > int64(len(b)) {
			return nil, ErrBroken
		}
		kind := string(b[at+4 : at+8])
		if keptChunks[kind] {
			out = append(out, b[at:end]...)
		}
		at = int(end)
		if kind == "IEND" {
			return out, nil
		}
	}
	return nil, ErrBroken
}

// Thumb decodes a photo, turns it the right way up and makes it fit into w × h pixels.
func Thumb(data []byte, w, h int) (image.Image, error) {
	f := Format(data)
	decode, config := jpeg.Decode, jpeg.DecodeConfig
	switch f {
	case "jpeg":
	case "png":
		decode, config = png.Decode, png.DecodeConfig
	default:
		return nil, ErrFormat
	}
	c, err := config(bytes.NewReader(data))
	if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrBroken, err)
	}
	if int64(c.Width)*int64(c.Height) > maxPixels {
		return nil, ErrLarge
	}
	src, err := decode(bytes.NewReader(data))
	if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrBroken, err)
	}
	o := 1
	if f == "jpeg" {
		o = orientationOf(data)
	}
	b := src.Bounds()
	sw, sh := b.Dx(), b.Dy()
	if o >= 5 {
		w, h = h, w
	}
	scale := min(float64(w)/float64(sw), float64(h)/float64(sh), 1)
	small := image.NewRGBA(image.Rect(0, 0, max(1, int(float64(sw)*scale+0.5)), max(1, int(float64(sh)*scale+0.5))))
	draw.ApproxBiLinear.Scale(small, small.Bounds(), src, b, draw.Src, nil)
	return turn(small, o), nil
}

// orientationOf finds the way up of a JPEG file.
func orientationOf(b []byte) int {
	for at := 2; at+4 <= len(b) && b[at] == 0xff && b[at+1] != 0xda; {
		n := int(binary.BigEndian.Uint16(b[at+2:]))
		if n < 2 || at+2+n > len(b) {
			break
		}
		if b[at+1] == 0xe1 {
			if o := orientation(b[at+4 : at+2+n]); o > 0 {
				return o
			}
		}
		at += 2 + n
	}
	return 1
}

// turn sets a picture upright: o is what Exif calls orientation, 1 to 8.
func turn(p *image.RGBA, o int) *image.RGBA {
	if o <= 1 {
		return p
	}
	w, h := p.Bounds().Dx(), p.Bounds().Dy()
	tw, th := w, h
	if o >= 5 {
		tw, th = h, w
	}
	out := image.NewRGBA(image.Rect(0, 0, tw, th))
	for y := range h {
		for x := range w {
			tx, ty := x, y
			switch o {
			case 2:
				tx = w - 1 - x
			case 3:
				tx, ty = w-1-x, h-1-y
			case 4:
				ty = h - 1 - y
			case 5:
				tx, ty = y, x
			case 6:
				tx, ty = h-1-y, x
			case 7:
				tx, ty = h-1-y, w-1-x
			case 8:
				tx, ty = y, w-1-x
			}
			out.SetRGBA(tx, ty, p.RGBAAt(x, y))
		}
	}
	return out
}
