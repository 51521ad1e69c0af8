package report

import (
	"bytes"
	"errors"
	"fmt"
	"image"
	"image/draw"
	"image/jpeg"
	"image/png"
	"io"
	"io/fs"
	"net/http"

	scaler "golang.org/x/image/draw"
)

const (
	// keepBytes is how large a photograph may be to stay as it is.
	keepBytes = 2 << 20
	// mostBytes and mostPixels are how much of one is read at all.
	mostBytes, mostPixels = 64 << 20, 120e6
	// scaledSide is the longer side of one that was made smaller, pixels.
	scaledSide = 1600
)

// photographs shows the pictures that came with marks.
func (b *builder) photographs() Section {
	s := Section{ID: "photographs", Title: "Photographs"}
	for _, m := range b.o.Marks {
		if m.Photo == "" {
			continue
		}
		caption := fmt.Sprintf("%s (mark %s, %s", m.What, m.ID, b.localTime(m.Time))
		if m.By != "" {
			caption += ", by " + m.By
		}
		caption += ")"
		if m.Withdrawn != "" {
			caption += "; withdrawn: " + m.Withdrawn
		}
		p, err := b.photo(m.Photo)
		if err != nil {
			s.Blocks = append(s.Blocks, Paragraph{caption + ". The photograph " + m.Photo + " is not shown: " + err.Error() + "."})
			continue
		}
		p.Caption, p.Alt = caption, "Photograph: "+m.What
		s.Blocks = append(s.Blocks, p)
	}
	return s
}

// photo reads a picture of the run folder; one above keepBytes is made smaller.
func (b *builder) photo(path string) (Picture, error) {
	var p Picture
	if b.o.Files == nil {
		return p, errors.New("the run folder is not at hand")
	}
	f, err := b.o.Files.Open(path)
	if err != nil {
		if errors.Is(err, fs.ErrNotExist) {
			return p, errors.New("it is not in the run folder")
		}
		return p, errors.New("it cannot be read")
	}
	defer f.Close()
	p.Data, err = io.ReadAll(io.LimitReader(f, mostBytes+1))
	if err != nil {
		return p, errors.New("it cannot be read")
	}
	if len(p.Data) > mostBytes {
		return p, errors.New("it is larger than 64 MB")
	}
	p.Type = http.DetectContentType(p.Data)
	if p.Type != "image/jpeg" && p.Type != "image/png" {
		return p, errors.New("it is neither JPEG nor PNG")
	}
	c, _, err := image.DecodeConfig(bytes.NewReader(p.Data))
	if err != nil || c.Width < 1 || c.Height < 1 {
		return p, errors.New("it is damaged")
	}
	if float64(c.Width)*float64(c.Height) > mostPixels {
		return p, errors.New("it has more than 120 million pixels")
	}
	p.Width, p.Height = c.Width, c.Height
	whole, _, err := image.Decode(bytes.NewReader(p.Data))
	if err != nil {
		return p, errors.New("it is damaged")
	}
	// A camera that was held sideways says so beside the picture, where neither
	// the PDF nor what is scaled here would know of it.
	turn := 1
	if p.Type == "image/jpeg" {
		turn = orientation(p.Data)
	}
	if len(p.Data) > keepBytes || turn != 1 {
		return smaller(whole, turn)
	}
	return p, nil
}

// smaller scales a picture to scaledSide, and turns it upright.
func smaller(whole image.Image, turn int) (Picture, error) {
	w, h := whole.Bounds().Dx(), whole.Bounds().Dy()
	if k := float64(scaledSide) / float64(max(w, h)); k < 1 {
		w, h = max(1, int(float64(w)*k)), max(1, int(float64(h)*k))
	}
	to := image.NewRGBA(image.Rect(0, 0, w, h))
	draw.Draw(to, to.Bounds(), image.White, image.Point{}, draw.Src)
	scaler.ApproxBiLinear.Scale(to, to.Bounds(), whole, whole.Bounds(), draw.Over, nil)
	final := upright(to, turn)
	var buf bytes.Buffer
	if err := jpeg.Encode(&buf, final, &jpeg.Options{Quality: 85}); err != nil {
		return Picture{}, err
	}
	return Picture{Type: "image/jpeg", Data: buf.Bytes(), Width: final.Bounds().Dx(), Height: final.Bounds().Dy()}, nil
}

// plainPNG turns any PNG into the plain kind that the PDF writer takes: eight
// bits, no interlacing, on white.
func plainPNG(data []byte) ([]byte, error) {
	m, err := png.Decode(bytes.NewReader(data))
	if err != nil {
		return nil, err
	}
	to := image.NewRGBA(image.Rect(0, 0, m.Bounds().Dx(), m.Bounds().Dy()))
	draw.Draw(to, to.Bounds(), image.White, image.Point{}, draw.Src)
	draw.Draw(to, to.Bounds(), m, m.Bounds().Min, draw.Over)
	var buf bytes.Buffer
	err = png.Encode(&buf, to)
	return buf.Bytes(), err
}
