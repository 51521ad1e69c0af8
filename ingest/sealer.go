package ingest

import (
	"errors"
	"io/fs"
	"path"
	"strings"

	"gaugelog/ingest/segment"
)

// sealer looks after closed segments: it compresses them, verified before the
// plain file goes, and keeps SHA256SUMS. A live recorder has it work in a
// goroutine, so that no sync waits for it; a fault of it costs no reading, and
// what it could not do is done at the next start of the run.
type sealer struct {
	fs       segment.FS
	sums     sums
	compress bool

	queue chan string
	gone  chan struct{}
	errs  []error
}

// waitingSegments bounds the closed segments that wait to be compressed; one
// beyond it stays plain until the run ends.
const waitingSegments = 64

func newSealer(fs segment.FS, s sums, compress bool) *sealer {
	return &sealer{fs: fs, sums: s, compress: compress}
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

// seal compresses one segment, where asked, and enters it in SHA256SUMS.
func (z *sealer) seal(name string) error {
	kept := name
	if z.compress && strings.HasSuffix(name, ".lp") {
		// A segment without its closing checkpoints stays as it lies.
		packed, err := compressSegment(z.fs, name)
		if err != nil {
			return err
		}
		kept = packed
	}
	if kept != name {
		delete(z.sums, name)
	}
	if err := z.sums.add(z.fs, kept); err != nil {
		return err
	}
	return z.sums.save(z.fs)
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
	errs = append(errs, z.sealAll())
	for _, name := range []string{rigName, marksName, eventsName, amendmentsName} {
		if exists(z.fs, name) {
			errs = append(errs, z.sums.add(z.fs, name))
		}
	}
	errs = append(errs, z.sums.save(z.fs))
	return errors.Join(errs...)
}

// sealAll takes up closed segments that SHA256SUMS does not name.
func (z *sealer) sealAll() error {
	names, err := unsealed(z.fs, z.sums)
	errs := []error{err}
	for _, name := range names {
		errs = append(errs, z.seal(name))
	}
	return errors.Join(errs...)
}

// unsealed lists the segments that SHA256SUMS does not name. Where a crash
// left a segment both plain and compressed, the plain one is listed.
func unsealed(fsys segment.FS, known sums) ([]string, error) {
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
