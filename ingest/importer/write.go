package importer

import "gaugelog/ingest/segment"

// folderWriter writes readings into segments.
type folderWriter struct {
	fs     segment.FS
	header segment.Header
	fill   *segment.Filler
}

func newFolderWriter(fs segment.FS, h segment.Header) *folderWriter {
	return &folderWriter{fs: fs, header: h, fill: segment.NewFiller(fs, h)}
}

// add appends readings.
func (f *folderWriter) add(list []reading) error {
	for i := range list {
		r := &list[i]
		err := f.fill.Put(r.at, func(w *segment.Writer) error {
			if r.probe {
				return w.Ambient(r.name, r.celsius, r.humidity, r.at)
			}
			return w.Indication(&segment.Shown{Gauge: r.name, MM: r.mm, Time: r.at, Shown: r.shown, Unit: r.unit, Status: plain(r.status)})
		})
		if err != nil {
			return err
		}
	}
	return nil
}

// seal closes and compresses the segments and enters the sums.
func (f *folderWriter) seal(marks bool) error {
	names := []string{segment.RigFile}
	if marks {
		names = append(names, segment.MarksFile)
	}
	return f.fill.Seal(names...)
}
