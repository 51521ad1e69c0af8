package report

import (
	"bytes"
	"encoding/binary"
	"image"
)

// orientation reads from a JPEG how a camera was held: the Exif tag Orientation
// (CIPA DC-008, tag 0x0112), 1 to 8. It is 1, upright, where the file says nothing
// that can be understood.
func orientation(jpeg []byte) int {
	if !bytes.HasPrefix(jpeg, []byte{0xff, 0xd8}) {
		return 1
	}
	for rest := jpeg[2:]; len(rest) >= 4 && rest[0] == 0xff && rest[1] != 0xda; {
		length := int(binary.BigEndian.Uint16(rest[2:]))
		if length < 2 || 2+length > len(rest) {
			return 1
		}
		if body, ok := bytes.CutPrefix(rest[4:2+length], []byte("Exif\x00\x00")); ok && rest[1] == 0xe1 {
			return exifOrientation(body)
		}
		rest = rest[2+length:]
	}
	return 1
}

// exifOrientation looks through the first directory of Exif's TIFF structure.
func exifOrientation(tiff []byte) int {
	var order binary.ByteOrder
	switch {
	case bytes.HasPrefix(tiff, []byte("II*\x00")):
		order = binary.LittleEndian
	case bytes.HasPrefix(tiff, []byte("MM\x00*")):
		order = binary.BigEndian
	default:
		return 1
	}
	if len(tiff) < 8 {
		return 1
	}
	at := int64(order.Uint32(tiff[4:]))
	if at+2 > int64(len(tiff)) {
		return 1
	}
	entries := tiff[at+2:]
	const entry, tag, short = 12, 0x0112, 3
	for range order.Uint16(tiff[at:]) {
		if len(entries) < entry {
			return 1
		}
		if order.Uint16(entries) == tag && order.Uint16(entries[2:]) == short {
			if v := int(order.Uint16(entries[8:])); v >= 1 && v <= 8 {
				return v
			}
			return 1
		}
		entries = entries[entry:]
	}
	return 1
}

// upright turns a picture as its orientation asks for.
func upright(m image.Image, orientation int) image.Image {
	if orientation <= 1 || orientation > 8 {
		return m
	}
	b := m.Bounds()
	w, h := b.Dx(), b.Dy()
	if orientation >= 5 { // a quarter turn
		w, h = h, w
	}
	out := image.NewRGBA(image.Rect(0, 0, w, h))
	for y := range h {
		for x := range w {
			fx, fy := x, y // in the file
			switch orientation {
			case 2:
				fx = w - 1 - x
			case 3:
				fx, fy = w-1-x, h-1-y
			case 4:
				fy = h - 1 - y
			case 5:
				fx, fy = y, x
			case 6:
				fx, fy = y, w-1-x
			case 7:
				fx, fy = h-1-y, w-1-x
			case 8:
				fx, fy = h-1-y, x
			}
			out.Set(x, y, m.At(b.Min.X+fx, b.Min.Y+fy))
		}
	}
	return out
}
