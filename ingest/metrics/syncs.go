package metrics

import (
	"time"

	"github.com/prometheus/client_golang/prometheus"

	"gaugelog/ingest/segment"
)

// Syncs measures how long the disk takes to make things durable. It stands
// between a recorder and its folder, and adds two looks at the clock a sync.
type Syncs struct{ durations *prometheus.HistogramVec }

// NewSyncs makes a meter for all runs of a process.
func NewSyncs() *Syncs {
	return &Syncs{prometheus.NewHistogramVec(prometheus.HistogramOpts{
		Namespace: "gaugelog", Name: "sync_duration_seconds", Help: "Time that the disk took for one sync.",
		Buckets: []float64{0.001, 0.003, 0.01, 0.03, 0.1, 0.3, 1, 3, 10, 30},
	}, []string{"rig"})}
}

// Over returns the folder of a rig with its syncs measured.
func (s *Syncs) Over(fsys segment.FS, rig string) segment.FS {
	return timedFS{fsys, s.durations.WithLabelValues(rig)}
}

type timedFS struct {
	segment.FS
	durations prometheus.Observer
}

func (t timedFS) timed(f segment.File, err error) (segment.File, error) {
	if err != nil {
		return nil, err
	}
	return timedFile{f, t.durations}, nil
}

func (t timedFS) Create(name string) (segment.File, error) { return t.timed(t.FS.Create(name)) }

func (t timedFS) Append(name string) (segment.File, error) { return t.timed(t.FS.Append(name)) }

type timedFile struct {
	segment.File
	durations prometheus.Observer
}

func (t timedFile) Sync() error {
	began := time.Now()
	err := t.File.Sync()
	t.durations.Observe(time.Since(began).Seconds())
	return err
}
