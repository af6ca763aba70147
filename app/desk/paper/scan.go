package paper

import (
	"bytes"
	"errors"
	"image"
	"image/color"
	"image/jpeg"
	"math"
	"regexp"
	"strconv"
)

// kind of a token in a page's drawing commands.
type kind uint8

const (
	number kind = iota
	name
	str
	list
	command
)

type token struct {
	kind   kind
	number float64
	word   string
	bytes  []byte
	items  []float64 // numbers of a list
	parts  [][]byte  // strings of a list
}

// scanner reads tokens one after another; what it does not know it passes over.
type scanner struct {
	b []byte
	i int
}

func space(c byte) bool {
	return c == ' ' || c == '\n' || c == '\r' || c == '\t' || c == 0 || c == '\f'
}

func delimiter(c byte) bool {
	return c == '(' || c == ')' || c == '<' || c == '>' || c == '[' || c == ']' || c == '/' || c == '%' || c == '{' || c == '}'
}

func (s *scanner) next() (token, bool) {
	for s.i < len(s.b) {
		c := s.b[s.i]
		switch {
		case space(c):
			s.i++
		case c == '%':
			for s.i < len(s.b) && s.b[s.i] != '\n' {
				s.i++
			}
		case c == '(':
			return token{kind: str, bytes: s.literal()}, true
		case c == '<':
			return token{kind: str, bytes: s.hex()}, true
		case c == '/':
			s.i++
			return token{kind: name, word: s.run()}, true
		case c == '[':
			s.i++
			t := token{kind: list}
			for s.i < len(s.b) {
				for s.i < len(s.b) && space(s.b[s.i]) {
					s.i++
				}
				if s.i >= len(s.b) || s.b[s.i] == ']' {
					s.i++
					break
				}
				inner, ok := s.next()
				if !ok {
					break
				}
				switch inner.kind {
				case number:
					t.items = append(t.items, inner.number)
				case str:
					t.parts = append(t.parts, inner.bytes)
				}
			}
			return t, true
		case delimiter(c):
			s.i++
		default:
			w := s.run()
			if x, err := strconv.ParseFloat(w, 64); err == nil && !math.IsNaN(x) && !math.IsInf(x, 0) {
				return token{kind: number, number: x}, true
			}
			return token{kind: command, word: w}, true
		}
	}
	return token{}, false
}

func (s *scanner) run() string {
	from := s.i
	for s.i < len(s.b) && !space(s.b[s.i]) && !delimiter(s.b[s.i]) {
		s.i++
	}
	return string(s.b[from:s.i])
}

// literal reads a string in brackets with its escapes.
func (s *scanner) literal() []byte {
	var out []byte
	depth := 0
	for ; s.i < len(s.b); s.i++ {
		c := s.b[s.i]
		switch c {
		case '(':
			if depth++; depth > 1 {
				out = append(out, c)
			}
		case ')':
			if depth--; depth == 0 {
				s.i++
				return out
			}
			out = append(out, c)
		case '\\':
			s.i++
			if s.i >= len(s.b) {
				return out
			}
			switch e := s.b[s.i]; e {
			case 'n':
				out = append(out, '\n')
			case 'r':
				out = append(out, '\r')
			case 't':
				out = append(out, '\t')
			case 'b':
				out = append(out, '\b')
			case 'f':
				out = append(out, '\f')
			default:
				if e >= '0' && e <= '7' {
					v := 0
					for k := 0; k < 3 && s.i < len(s.b) && s.b[s.i] >= '0' && s.b[s.i] <= '7'; k++ {
						v = v*8 + int(s.b[s.i]-'0')
						s.i++
					}
					s.i--
					out = append(out, byte(v))
				} else {
					out = append(out, e)
				}
			}
		default:
			out = append(out, c)
		}
	}
	return out
}

func (s *scanner) hex() []byte {
	s.i++
	var out []byte
	var half, have byte
	for ; s.i < len(s.b); s.i++ {
		c := s.b[s.i]
		var v byte
		switch {
		case c == '>':
			s.i++
			return out
		case c >= '0' && c <= '9':
			v = c - '0'
		case c >= 'a' && c <= 'f':
			v = c - 'a' + 10
		case c >= 'A' && c <= 'F':
			v = c - 'A' + 10
		default:
			continue
		}
		if have == 0 {
			half, have = v, 1
		} else {
			out, have = append(out, half<<4|v), 0
		}
	}
	return out
}

func sqrt(x float64) float64 { return math.Sqrt(x) }

var sizeOf = regexp.MustCompile(`/(Width|Height|Colors|Predictor)\s+(\d+)`)

// picture reads an embedded picture: JPEG, or rows of grey or RGB bytes with or without the
// predictors of PNG.
func picture(o object) (image.Image, error) {
	if bytes.Contains(o.head, []byte("/DCTDecode")) {
		return jpeg.Decode(bytes.NewReader(o.stream))
	}
	v := map[string]int{"Predictor": 1, "Colors": 3}
	if bytes.Contains(o.head, []byte("/DeviceGray")) {
		v["Colors"] = 1
	}
	for _, m := range sizeOf.FindAllSubmatch(o.head, -1) {
		v[string(m[1])], _ = strconv.Atoi(string(m[2]))
	}
	w, h, n := v["Width"], v["Height"], v["Colors"]
	if w < 1 || h < 1 || w*h > 50e6 || n != 1 && n != 3 {
		return nil, errors.New("an embedded picture of an unknown kind")
	}
	stride, lead := w*n, 0
	if v["Predictor"] >= 10 {
		lead = 1
	}
	if len(o.stream) < (stride+lead)*h {
		return nil, errors.New("an embedded picture is cut short")
	}
	img := image.NewRGBA(image.Rect(0, 0, w, h))
	prev := make([]byte, stride)
	for y := range h {
		row := o.stream[y*(stride+lead) : (y+1)*(stride+lead)]
		cur := append([]byte(nil), row[lead:]...)
		if lead == 1 {
			unfilter(row[0], cur, prev, n)
		}
		for x := range w {
			c := color.RGBA{cur[x*n], cur[x*n], cur[x*n], 255}
			if n == 3 {
				c.G, c.B = cur[x*3+1], cur[x*3+2]
			}
			img.SetRGBA(x, y, c)
		}
		prev = cur
	}
	return img, nil
}

// unfilter undoes a PNG predictor (PNG specification, section 9).
func unfilter(how byte, cur, prev []byte, n int) {
	for i := range cur {
		var a, b, c int
		if i >= n {
			a, c = int(cur[i-n]), int(prev[i-n])
		}
		b = int(prev[i])
		switch how {
		case 1:
			cur[i] += byte(a)
		case 2:
			cur[i] += byte(b)
		case 3:
			cur[i] += byte((a + b) / 2)
		case 4:
			p := a + b - c
			pa, pb, pc := abs(p-a), abs(p-b), abs(p-c)
			switch {
			case pa <= pb && pa <= pc:
				cur[i] += byte(a)
			case pb <= pc:
				cur[i] += byte(b)
			default:
				cur[i] += byte(c)
			}
		}
	}
}

func abs(x int) int {
	if x < 0 {
		return -x
	}
	return x
}
