package forward

import (
	"os"
	"path/filepath"
	"testing"

	"gaugelog/ingest/segment"
)

// TestBeforeTheFirstReading: a run that has nothing yet is no error.
func TestBeforeTheFirstReading(t *testing.T) {
	dir := t.TempDir()
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	s := newServer(t)
	got, err := forwardRun(t, t.Context(), segment.OSFS(root, segment.OSOptions{}), filepath.Join(dir, StateDir), s.URL+"/write?db=lab", "", nil)
	if err != nil || got.Sent != 0 {
		t.Errorf("%+v, %v", got, err)
	}
}
