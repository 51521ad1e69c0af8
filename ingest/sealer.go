package ingest

import (
	"errors"
	"fmt"
	"io/fs"
	"path"
	"strconv"
	"strings"

	"gaugelog/ingest/segment"
)

// sealer looks after closed segments: it compresses them, verified before the
// plain file goes, and enters them in SHA256SUMS. A live recorder has it work
// in a goroutine, so that no sync waits for it; a fault of it costs no reading,
// and what it could not do is done when the run ends or goes on.
//
// The logs are entered only when the run ends: before that they grow.
type sealer struct {
	fs       segment.FS
	compress bool

	queue chan string
	gone  chan struct{}
	errs  []error
}

// waitingSegments bounds the closed segments that wait to be compressed; one
// beyond it stays plain until the run ends.
const waitingSegments = 64

func newSealer(fs segment.FS, compress bool) *sealer {
	return &sealer{fs: fs, compress: compress}
}

// start puts the work behind a goroutine, which finish ends.
func (z *sealer) start() {
	queue := make(chan string, waitingSegments)
	z.queue, z.gone = queue, make(chan struct{})
	go func() {
		defer close(z.gone)
		for name := range queue {
			z.note(z.seal(name))
		}
	}()
}

// take is told of a closed segment.
func (z *sealer) take(name string, _ segment.ClockState) {
	if z.queue == nil {
		z.note(z.seal(name))
		return
	}
	select {
	case z.queue <- name:
	default:
	}
}

// takeAll is told of the segments that an earlier recorder did not seal.
func (z *sealer) takeAll(names []string) {
	for _, name := range names {
		z.take(name, segment.ClockState{})
	}
}

// note keeps the first few errors for finish.
func (z *sealer) note(err error) {
	if err != nil && len(z.errs) < 8 {
		z.errs = append(z.errs, err)
	}
}

// seal compresses one segment, where asked, and enters it in SHA256SUMS. A
// damaged segment is entered as it lies.
func (z *sealer) seal(name string) error {
	if number := segmentNumber(name); z.compress && number > 0 {
		packed, err := segment.Compress(z.fs, number)
		var damage *segment.Damage
		if err != nil && !errors.As(err, &damage) {
			return fmt.Errorf("compressing %s: %w", name, err)
		}
		if err == nil {
			name = packed.Name
		}
	}
	return segment.UpdateSums(z.fs, name, rigName)
}

// segmentNumber is the number of a plain segment; 0 for any other name.
func segmentNumber(name string) int {
	n, err := strconv.Atoi(strings.TrimSuffix(path.Base(name), ".lp"))
	if err != nil || segment.SegmentName(segment.ReadingsDir, n) != name {
		return 0
	}
	return n
}

// finish ends the goroutine, takes up what was left, and enters every file of
// the folder that is closed now.
func (z *sealer) finish() error {
	if z.queue != nil {
		close(z.queue)
		<-z.gone
		z.queue = nil
	}
	errs := append([]error(nil), z.errs...)
	names, err := unsealed(z.fs)
	errs = append(errs, err)
	for _, name := range names {
		errs = append(errs, z.seal(name))
	}
	closed := []string{rigName}
	for _, name := range []string{marksName, eventsName, amendmentsName} {
		if exists(z.fs, name) {
			closed = append(closed, name)
		}
	}
	errs = append(errs, segment.UpdateSums(z.fs, closed...))
	return errors.Join(errs...)
}

// unsealed lists the segments that SHA256SUMS does not name.
func unsealed(fsys segment.FS) ([]string, error) {
	known, err := segment.ReadSums(fsys)
	if err != nil {
		return nil, err
	}
	entries, err := fsys.ReadDir(segment.ReadingsDir)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	var names []string
	for _, e := range entries {
		name := path.Join(segment.ReadingsDir, e.Name())
		if _, ok := known[name]; !ok && (strings.HasSuffix(name, ".lp") || strings.HasSuffix(name, ".lp.zst")) {
			names = append(names, name)
		}
	}
	return names, nil
}
