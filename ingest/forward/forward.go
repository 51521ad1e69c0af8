package forward

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"net/http"
	"os"
	"path/filepath"
	"time"

	"github.com/cenkalti/backoff/v5"
	"github.com/gofrs/flock"
	"github.com/klauspost/compress/gzip"

	"gaugelog/ingest/segment"
)

// StateDir is the folder in a run that holds what forwarding remembers.
const StateDir = "forward"

// Notice tells of something on the way. All fields empty: a body was taken.
type Notice struct {
	// Words are what the server said, or what failed; Wait is how long
	// forwarding waits before it tries again.
	Words string
	Wait  time.Duration
	// Held says that a person must do something: the server refuses access, or
	// is none of this kind.
	Held bool
	// Refused is a line that was set aside.
	Refused string
	// Again says why something is sent again.
	Again string
}

// Options is what forwarding a run needs.
type Options struct {
	FS segment.FS
	// State is the folder that holds the cursor and the refused lines.
	State  string
	Target *Target
	// Token reads the token anew where access is refused, so that one that was
	// put right is taken up; nil: it stays.
	Token func() (string, error)
	// Rig and Run are the tags added to each line; Run "" is the run's id.
	Rig, Run string
	Program  string
	// Brief, where not empty, is what config.Rig.Brief tells of the rig file. It is
	// sent once behind the first readings after each start, with their last
	// stamp, as the point "rig brief=...": so that who asks the server how the
	// rigs stand knows senses, limits and plans.
	Brief string
	// Lines and Bytes bound one body; 0: 5000 lines, 1 MB before packing.
	Lines, Bytes int
	// Hold is the least wait where access is refused; 0: 1 min.
	Hold time.Duration
	// Poll is how often a run being recorded is looked at; 0: 1 s.
	Poll time.Duration
	// Tell hears of what happens; may be nil. It must not wait.
	Tell func(Notice)
	// Wait waits for a time or the context; nil: really.
	Wait func(context.Context, time.Duration) error
	// opened hands the forwarder to a test.
	opened func(*Forwarder)
	// Client sends; nil: one that follows no redirect, with a limit of 60 s.
	Client *http.Client
}

// Count is what was done so far.
type Count struct {
	// Sent counts lines that the server took (again ones too), Refused those
	// set aside, Held those kept back for their clock, Retries the waits.
	Sent, Refused, Held, Retries int64
}

// Forwarder sends one run to one server. Not safe for use by several goroutines.
type Forwarder struct {
	o        Options
	client   *http.Client
	state    *os.Root
	lock     *flock.Flock
	name     string // of the cursor
	cursor   *cursor
	liner    *liner
	pause    *backoff.ExponentialBackOff
	zip      *gzip.Writer
	packed   bytes.Buffer
	lines    []byte
	bytes    int // bound of one body; less once the server said 413
	refusals int // in a row
	count    Count
	briefed  bool // Brief was sent
	board    board
	// whole are the segments sent to their end, to which nothing is added.
	whole map[string]bool
}

// Open takes up where an earlier forwarding of the run to this server ended.
// The caller must call Close.
func Open(o Options) (*Forwarder, error) {
	if o.Lines <= 0 {
		o.Lines = 5000
	}
	if o.Bytes <= 0 {
		o.Bytes = 1 << 20
	}
	if o.Hold <= 0 {
		o.Hold = time.Minute
	}
	if o.Poll <= 0 {
		o.Poll = time.Second
	}
	if o.Wait == nil {
		o.Wait = sleep
	}
	f := &Forwarder{o: o, client: o.Client, bytes: o.Bytes, zip: newZip(), pause: backoff.NewExponentialBackOff(), whole: map[string]bool{}}
	if f.client == nil {
		f.client = newClient()
	}
	f.pause.InitialInterval, f.pause.MaxInterval = time.Second, 5*time.Minute
	f.pause.Multiplier, f.pause.RandomizationFactor = 2, 0.5
	d, err := segment.OpenFolder(o.FS)
	if err != nil {
		return nil, err
	}
	id := d.RunID()
	if f.o.Run == "" {
		f.o.Run = id
	}
	f.liner = newLiner(f.o.Run, o.Rig)
	sum := sha256.Sum256([]byte(o.Target.URL.Scheme + o.Target.URL.Host + o.Target.URL.Path + o.Target.URL.RawQuery))
	f.name = "to-" + hex.EncodeToString(sum[:6])
	if err := f.openState(id); err != nil {
		return nil, errors.Join(err, f.Close())
	}
	if o.opened != nil {
		o.opened(f)
	}
	return f, nil
}

// openState takes the lock and reads the cursor.
func (f *Forwarder) openState(run string) error {
	if err := os.MkdirAll(f.o.State, 0o775); err != nil {
		return err
	}
	var err error
	if f.state, err = os.OpenRoot(f.o.State); err != nil {
		return err
	}
	f.lock = flock.New(filepath.Join(f.o.State, f.name+".lock"), flock.SetPermissions(0o664))
	got, err := f.lock.TryLock()
	if err != nil {
		return err
	}
	if !got {
		return errors.New("this run is being forwarded to that server already")
	}
	c, again, err := loadCursor(f.state, f.name, run)
	if err != nil {
		return err
	}
	if f.cursor = c; again != "" {
		f.tell(Notice{Again: again})
	}
	return nil
}

// Close lets go of the state.
func (f *Forwarder) Close() error {
	var errs []error
	if f.lock != nil {
		errs = append(errs, f.lock.Close())
	}
	if f.state != nil {
		errs = append(errs, f.state.Close())
	}
	f.client.CloseIdleConnections()
	return errors.Join(errs...)
}

// Count tells what was done so far.
func (f *Forwarder) Count() Count { return f.count }

func (f *Forwarder) tell(n Notice) {
	f.noted(n)
	if f.o.Tell != nil {
		f.o.Tell(n)
	}
}

// Run sends what is in the folder, and with follow goes on until the context
// ends. The end of the context is its error; else it fails only where the
// folder or the state cannot be read or written.
func (f *Forwarder) Run(ctx context.Context, follow bool) error {
	seen := ""
	for {
		now, err := f.signature()
		if err != nil {
			return err
		}
		if now != seen || !follow {
			if err := f.pass(ctx); err != nil {
				return err
			}
			seen = now
		}
		if !follow {
			return nil
		}
		if err := f.o.Wait(ctx, f.o.Poll); err != nil {
			return err
		}
	}
}
