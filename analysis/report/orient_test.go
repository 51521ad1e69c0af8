package report

import (
	"bytes"
	"encoding/binary"
	"image"
	"image/color"
	"image/jpeg"
	"testing"
	"testing/fstest"

	"pgregory.net/rapid"
)

// withOrientation puts an Exif segment with an orientation into a JPEG.
func withOrientation(jpeg []byte, order binary.AppendByteOrder, value uint16) []byte {
	tiff := []byte("II*\x00")
	if order == binary.AppendByteOrder(binary.BigEndian) {
		tiff = []byte("MM\x00*")
	}
	tiff = order.AppendUint32(tiff, 8)
	tiff = order.AppendUint16(tiff, 2)
	for _, e := range []struct{ tag, value uint16 }{{0x0100, 80}, {0x0112, value}} {
		tiff = order.AppendUint16(tiff, e.tag)
		tiff = order.AppendUint16(tiff, 3)
		tiff = order.AppendUint32(tiff, 1)
		tiff = order.AppendUint16(order.AppendUint16(tiff, e.value), 0)
	}
	body := append([]byte("Exif\x00\x00"), tiff...)
	out := append([]byte{}, jpeg[:2]...)
	out = append(out, 0xff, 0xe0, 0, 4, 'J', 'F', 0xff, 0xe1)
	out = binary.BigEndian.AppendUint16(out, uint16(len(body)+2))
	return append(append(out, body...), jpeg[2:]...)
}

// cornered is a picture 64 wide and 32 high, white but for a black top left quarter
// and a grey top right one.
func cornered(t *testing.T) []byte {
	t.Helper()
	m := image.NewGray(image.Rect(0, 0, 64, 32))
	for y := range 32 {
		for x := range 64 {
			v := uint8(255)
			if y < 16 {
				v = map[bool]uint8{true: 0, false: 128}[x < 32]
			}
			m.SetGray(x, y, color.Gray{Y: v})
		}
	}
	var b bytes.Buffer
	if err := jpeg.Encode(&b, m, &jpeg.Options{Quality: 95}); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// Where the file's first and last pixel of its first row are to be seen, by the
// definition of the tag (CIPA DC-008, from memory: 6 is "row 0 at the right, column
// 0 at the top"), as corners: left or right, top or bottom.
func TestPhotographsStandUpright(t *testing.T) {
	for value, c := range map[uint16]struct{ first, last string }{
		1: {"lt", "rt"}, 2: {"rt", "lt"}, 3: {"rb", "lb"}, 4: {"lb", "rb"}, 5: {"lt", "lb"}, 6: {"rt", "rb"}, 7: {"rb", "rt"}, 8: {"lb", "lt"},
	} {
		for _, order := range []binary.AppendByteOrder{binary.LittleEndian, binary.BigEndian} {
			data := withOrientation(cornered(t), order, value)
			b := &builder{o: Options{Files: fstest.MapFS{"p.jpg": {Data: data}}}}
			p, err := b.photo("p.jpg")
			if err != nil {
				t.Fatal(err)
			}
			m, err := jpeg.Decode(bytes.NewReader(p.Data))
			if err != nil {
				t.Fatal(err)
			}
			w, h := 64, 32
			if value >= 5 {
				w, h = 32, 64
			}
			if p.Width != w || p.Height != h || m.Bounds().Dx() != w {
				t.Errorf("orientation %d: %d x %d, want %d x %d", value, p.Width, p.Height, w, h)
			}
			seen := func(corner string) uint8 {
				x, y := 3, 3
				if corner[0] == 'r' {
					x = w - 4
				}
				if corner[1] == 'b' {
					y = h - 4
				}
				return color.GrayModel.Convert(m.At(x, y)).(color.Gray).Y
			}
			if v := seen(c.first); v > 40 {
				t.Errorf("orientation %d: the first corner shows %d at %s", value, v, c.first)
			}
			if v := seen(c.last); v < 90 || v > 170 {
				t.Errorf("orientation %d: the second corner shows %d at %s", value, v, c.last)
			}
			if orientation(p.Data) != 1 {
				t.Errorf("orientation %d: what is shown still asks to be turned", value) // value 1 stays as it was
			}
		}
	}
	if got := orientation(withOrientation(cornered(t), binary.BigEndian, 9)); got != 1 {
		t.Errorf("an orientation that there is not is %d", got)
	}
}

// Whatever a file holds, its orientation is one of the eight.
func TestOrientationOfAnything(t *testing.T) {
	whole := withOrientation(cornered(t), binary.LittleEndian, 6)[:60]
	rapid.Check(t, func(t *rapid.T) {
		data := append([]byte{}, whole[:rapid.IntRange(0, len(whole)).Draw(t, "length")]...)
		for range rapid.IntRange(0, 4).Draw(t, "changes") {
			if len(data) > 0 {
				data[rapid.IntRange(0, len(data)-1).Draw(t, "at")] = rapid.Byte().Draw(t, "byte")
			}
		}
		if v := orientation(data); v < 1 || v > 8 {
			t.Fatalf("orientation %d", v)
		}
	})
}
