package picture_test

import (
	"bytes"
	"encoding/binary"
	"hash/crc32"
	"image"
	"image/color"
	"image/jpeg"
	"image/png"
	"io"
	"math"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"cordwalk.example/cordwalk/app/view/picture"
	"cordwalk.example/cordwalk/exam"
)

// place stands in every made file where a camera would write where it was.
const place = "GPS 48.2082 N 16.3738 E"

// sample is 40 × 20: left half red, right half blue, and a white corner at the top left.
func sample() image.Image {
	p := image.NewRGBA(image.Rect(0, 0, 40, 20))
	for y := range 20 {
		for x := range 40 {
			c := color.RGBA{220, 0, 0, 255}
			if x >= 20 {
				c = color.RGBA{0, 0, 220, 255}
			}
			if x < 10 && y < 10 {
				c = color.RGBA{255, 255, 255, 255}
			}
			p.Set(x, y, c)
		}
	}
	return p
}

// photo is a JPEG file with an orientation and a place in its Exif data, a comment, and bytes behind its end.
func photo(t testing.TB, orientation uint16, order binary.AppendByteOrder) []byte {
	var b bytes.Buffer
	require.NoError(t, jpeg.Encode(&b, sample(), &jpeg.Options{Quality: 95}))
	tiff := []byte("MM")
	if order == binary.AppendByteOrder(binary.LittleEndian) {
		tiff = []byte("II")
	}
	tiff = order.AppendUint32(order.AppendUint16(tiff, 42), 8)
	tiff = order.AppendUint16(tiff, 1)
	tiff = order.AppendUint32(order.AppendUint16(order.AppendUint16(tiff, 0x0112), 3), 1)
	tiff = order.AppendUint16(order.AppendUint16(tiff, orientation), 0)
	tiff = append(order.AppendUint32(tiff, 0), place...)
	segment := func(m byte, body []byte) []byte {
		return append(binary.BigEndian.AppendUint16([]byte{0xff, m}, uint16(len(body)+2)), body...)
	}
	raw := b.Bytes()
	out := append([]byte{0xff, 0xd8}, segment(0xe1, append([]byte("Exif\x00\x00"), tiff...))...)
	out = append(out, segment(0xed, []byte(place))...)
	out = append(out, segment(0xfe, []byte(place))...)
	return append(append(out, raw[2:]...), place...)
}

func clean(t testing.TB, b []byte) (picture.Cleaned, []byte) {
	c, err := picture.Clean(bytes.NewReader(b), int64(len(b)))
	require.NoError(t, err)
	out, err := io.ReadAll(c.Reader)
	require.NoError(t, err)
	require.Equal(t, c.Size, int64(len(out)))
	require.NotContains(t, string(out), place)
	require.NotContains(t, string(out), "48.2082")
	return c, out
}

// where the white corner and the red half must stand once the picture is upright; Exif 2.3, table of
// tag 0x0112: what is the first row and the first column.
func TestPhotosLoseTheirPlaceAndKeepTheWayUp(t *testing.T) {
	for _, order := range []binary.AppendByteOrder{binary.BigEndian, binary.LittleEndian} {
		for o, corner := range map[uint16][2]int{1: {0, 0}, 2: {1, 0}, 3: {1, 1}, 4: {0, 1}, 5: {0, 0}, 6: {1, 0}, 7: {1, 1}, 8: {0, 1}} {
			c, out := clean(t, photo(t, o, order))
			require.Equal(t, "jpeg", c.Format)
			_, err := jpeg.Decode(bytes.NewReader(out))
			require.NoError(t, err)
			p, err := picture.Thumb(out, 400, 400)
			require.NoError(t, err)
			w, h := p.Bounds().Dx(), p.Bounds().Dy()
			if o >= 5 {
				require.Equal(t, []int{20, 40}, []int{w, h}, "orientation %d", o)
			} else {
				require.Equal(t, []int{40, 20}, []int{w, h}, "orientation %d", o)
			}
			r, g, b, _ := p.At(corner[0]*(w-1), corner[1]*(h-1)).RGBA()
			require.Greater(t, min(r, g, b), uint32(0xc000), "orientation %d: the white corner", o)
			again, twice := clean(t, out)
			require.Equal(t, out, twice, "cleaning twice changes nothing")
			require.Equal(t, c.Size, again.Size)
		}
	}
}

func TestThumbsFit(t *testing.T) {
	p, err := picture.Thumb(photo(t, 6, binary.BigEndian), 10, 10)
	require.NoError(t, err)
	require.Equal(t, image.Rect(0, 0, 5, 10), p.Bounds())
}

func TestPNGKeepsOnlyThePicture(t *testing.T) {
	var b bytes.Buffer
	require.NoError(t, png.Encode(&b, sample()))
	raw := b.Bytes()
	body := append([]byte("tEXt"), "Comment\x00"+place...)
	chunk := binary.BigEndian.AppendUint32(nil, uint32(len(body)-4))
	chunk = binary.BigEndian.AppendUint32(append(chunk, body...), crc32.ChecksumIEEE(body))
	with := append(append(append([]byte{}, raw[:33]...), chunk...), raw[33:]...)
	with = append(with, place...)
	_, out := clean(t, with)
	require.Equal(t, raw, out)
}

func box(kind string, body ...string) string {
	s := strings.Join(body, "")
	return string(binary.BigEndian.AppendUint32(nil, uint32(len(s)+8))) + kind + s
}

func numbers(n ...uint32) string {
	var b []byte
	for _, x := range n {
		b = binary.BigEndian.AppendUint32(b, x)
	}
	return string(b)
}

// A clip is made as ISO/IEC 14496-12 lays it out: a track of pictures, a track of places, user data.
func TestClipsLoseTheirPlaceAndMoveNothing(t *testing.T) {
	const pictures = "the pictures themselves"
	head := box("ftyp", "qt  ", numbers(0), "qt  ")
	mdat := box("mdat", pictures, place)
	first := uint32(len(head) + 8)
	track := func(handler string, at uint32, size int) string {
		return box("trak", box("mdia", box("hdlr", numbers(0, 0), handler, numbers(0, 0, 0)),
			box("minf", box("stbl", box("stsz", numbers(0, 0, 1, uint32(size))), box("stsc", numbers(0, 1, 1, 1, 1)), box("stco", numbers(0, 1, at))))),
			box("udta", place))
	}
	movie := head + mdat + box("moov", track("vide", first, len(pictures)), track("meta", first+uint32(len(pictures)), len(place)),
		box("udta", box("\xa9xyz", place)), box("meta", place))
	c, out := clean(t, []byte(movie))
	require.Equal(t, "mov", c.Format)
	require.Len(t, out, len(movie))
	require.Equal(t, movie[:len(head)+8+len(pictures)], string(out[:len(head)+8+len(pictures)]), "the pictures stay where they are")
	require.Contains(t, string(out), "stco"+numbers(0, 1, first))

	_, err := picture.Clean(strings.NewReader(movie[:len(movie)-3]), int64(len(movie)-3))
	require.ErrorIs(t, err, picture.ErrBroken)
}

// The elements are those of RFC 9559; sizes take one byte each.
func TestWebMLosesItsTags(t *testing.T) {
	element := func(id string, body string) string { return id + string([]byte{0x40, byte(len(body))}) + body }
	header := element("\x1a\x45\xdf\xa3", element("\x42\x82", "webm"))
	cluster := "\x1f\x43\xb6\x75\x01\xff\xff\xff\xff\xff\xff\xff" + element("\xe7", "\x00") + element("\xa3", "frame")
	movie := header + "\x18\x53\x80\x67\x01\xff\xff\xff\xff\xff\xff\xff" + element("\x15\x49\xa9\x66", element("\x7b\xa9", place)) + element("\x12\x54\xc3\x67", place) + cluster
	c, out := clean(t, []byte(movie))
	require.Equal(t, "webm", c.Format)
	require.True(t, bytes.HasSuffix(out, []byte(cluster)))
	require.Len(t, out, len(movie))
}

// A clip of JPEG pictures, as ISO/IEC 14496-12 and the QuickTime File Format lay it out, gives its first frame and its
// length; one of another codec gives its length alone.
func TestClipsAreDescribed(t *testing.T) {
	var frame bytes.Buffer
	require.NoError(t, jpeg.Encode(&frame, sample(), nil))
	head := box("ftyp", "qt  ", numbers(0), "qt  ")
	movie := func(codec string) string {
		at := uint32(len(head) + 8)
		return head + box("mdat", frame.String(), "the frames after it") + box("moov", box("mvhd", numbers(0, 0, 0, 600, 7500)),
			box("trak", box("mdia", box("hdlr", numbers(0, 0), "soun", numbers(0, 0, 0)))),
			box("trak", box("mdia", box("hdlr", numbers(0, 0), "vide", numbers(0, 0, 0)), box("minf", box("stbl",
				box("stsd", numbers(0, 1), box(codec, numbers(0, 0))),
				box("stsz", numbers(0, 0, 2, uint32(frame.Len()), 19)), box("stsc", numbers(0, 1, 1, 2, 1)), box("stco", numbers(0, 1, at)))))))
	}
	whole := movie("jpeg")
	c, err := picture.Describe(strings.NewReader(whole), int64(len(whole)), 400, 400)
	require.NoError(t, err)
	require.Equal(t, 12500*time.Millisecond, c.Length)
	require.Equal(t, "jpeg", c.Codec)
	require.NotNil(t, c.First)
	want, err := jpeg.Decode(bytes.NewReader(frame.Bytes()))
	require.NoError(t, err)
	require.Equal(t, want.Bounds().Size(), c.First.Bounds().Size())
	for _, p := range []image.Point{{0, 0}, {7, 3}} {
		r1, g1, b1, _ := want.At(p.X, p.Y).RGBA()
		r2, g2, b2, _ := c.First.At(p.X, p.Y).RGBA()
		require.InDelta(t, r1>>8, r2>>8, 6)
		require.InDelta(t, g1>>8, g2>>8, 6)
		require.InDelta(t, b1>>8, b2>>8, 6)
	}
	whole = movie("avc1")
	c, err = picture.Describe(strings.NewReader(whole), int64(len(whole)), 400, 400)
	require.NoError(t, err)
	require.Nil(t, c.First)
	require.Equal(t, "avc1", c.Codec)
	_, err = picture.Describe(strings.NewReader(whole[:len(whole)-40]), int64(len(whole)-40), 400, 400)
	require.ErrorIs(t, err, picture.ErrBroken)

	// RFC 9559: Duration counts in steps of TimestampScale, a million nanoseconds unless it is said.
	element := func(id string, body string) string { return id + string([]byte{0x40, byte(len(body))}) + body }
	length := string(binary.BigEndian.AppendUint64(nil, math.Float64bits(18250)))
	webm := element("\x1a\x45\xdf\xa3", element("\x42\x82", "webm")) + "\x18\x53\x80\x67\x01\xff\xff\xff\xff\xff\xff\xff" +
		element("\x15\x49\xa9\x66", element("\x2a\xd7\xb1", "\x0f\x42\x40")+element("\x44\x89", length)) +
		element("\x16\x54\xae\x6b", element("\xae", element("\x86", "V_VP9")))
	c, err = picture.Describe(strings.NewReader(webm), int64(len(webm)), 400, 400)
	require.NoError(t, err)
	require.Equal(t, picture.Clip{Length: 18250 * time.Millisecond, Codec: "V_VP9"}, c)
}

func TestWhatIsNotTaken(t *testing.T) {
	for name, tt := range map[string]struct {
		data string
		size int64
		want error
	}{
		"empty":      {"", 0, picture.ErrFormat},
		"text":       {"a letter", 8, picture.ErrFormat},
		"heic":       {box("ftyp", "heic", numbers(0)), 16, picture.ErrHEIC},
		"large":      {"\xff\xd8\xff", exam.MaxPhoto + 1, picture.ErrLarge},
		"large clip": {box("ftyp", "isom", numbers(0)), exam.MaxClip + 1, picture.ErrLarge},
		"cut short":  {string(photo(t, 1, binary.BigEndian)[:120]), 120, picture.ErrBroken},
	} {
		_, err := picture.Clean(strings.NewReader(tt.data), tt.size)
		require.ErrorIs(t, err, tt.want, name)
	}
}

func FuzzClean(f *testing.F) {
	f.Add(photo(f, 6, binary.BigEndian))
	f.Add([]byte(box("ftyp", "isom", numbers(0)) + box("moov", box("trak"))))
	f.Add([]byte("\x1a\x45\xdf\xa3\x84webm\x18\x53\x80\x67\xff"))
	f.Fuzz(func(t *testing.T, b []byte) {
		if d, err := picture.Describe(bytes.NewReader(b), int64(len(b)), 8, 8); err == nil && d.Length < 0 {
			t.Fatalf("a clip lasts %v", d.Length)
		}
		c, err := picture.Clean(bytes.NewReader(b), int64(len(b)))
		if err != nil {
			return
		}
		out, err := io.ReadAll(c.Reader)
		if err != nil || int64(len(out)) != c.Size {
			t.Fatalf("%d bytes of %d, %v", len(out), c.Size, err)
		}
	})
}
