package report

import (
	"bytes"
	"image"
	"image/jpeg"
	"math/rand/v2"
	"strings"
	"testing"
	"testing/fstest"
)

func TestPhotographs(t *testing.T) {
	noise := image.NewRGBA(image.Rect(0, 0, 2400, 1600))
	random := rand.New(rand.NewPCG(1, 2))
	for i := range noise.Pix {
		noise.Pix[i] = byte(random.UintN(256))
	}
	var big, small bytes.Buffer
	if err := jpeg.Encode(&big, noise, &jpeg.Options{Quality: 95}); err != nil {
		t.Fatal(err)
	}
	if err := jpeg.Encode(&small, noise.SubImage(image.Rect(0, 0, 80, 60)), nil); err != nil {
		t.Fatal(err)
	}
	if big.Len() <= keepBytes {
		t.Fatalf("the big picture has only %d bytes", big.Len())
	}
	b := &builder{o: Options{Files: fstest.MapFS{
		"photos/small.jpg": {Data: small.Bytes()}, "photos/big.jpg": {Data: big.Bytes()},
		"photos/cut.jpg": {Data: small.Bytes()[:small.Len()/2]}, "photos/words.jpg": {Data: []byte("no picture")},
		"photos/deep.png": {Data: picture(t, 30, 20)},
	}}}
	p, err := b.photo("photos/small.jpg")
	if err != nil || !bytes.Equal(p.Data, small.Bytes()) || p.Width != 80 || p.Height != 60 {
		t.Errorf("a small picture does not stay as it is: %v", err)
	}
	p, err = b.photo("photos/big.jpg")
	if err != nil || p.Width != scaledSide || p.Height != 1066 || len(p.Data) >= big.Len() {
		t.Errorf("a big picture came out as %d x %d: %v", p.Width, p.Height, err)
	}
	if p, err = b.photo("photos/deep.png"); err != nil || p.Type != "image/png" {
		t.Errorf("a PNG is not taken: %v", err)
	}
	for path, want := range map[string]string{
		"photos/cut.jpg": "damaged", "photos/words.jpg": "neither JPEG nor PNG", "photos/none.jpg": "not in the run folder", "../rig.yaml": "not in the run folder",
	} {
		if _, err := b.photo(path); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: got %v, want %q", path, err, want)
		}
	}
}
