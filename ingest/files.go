package ingest

import "gaugelog/ingest/segment"

func openSized(fsys segment.FS, name string) (segment.File, int64, error) {
	f, err := fsys.Open(name)
	if err != nil {
		return nil, 0, err
	}
	info, err := f.Stat()
	if err != nil {
		f.Close()
		return nil, 0, err
	}
	return f, info.Size(), nil
}
