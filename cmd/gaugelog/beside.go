package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"path/filepath"
	"sync"
	"time"

	"github.com/spf13/pflag"

	"gaugelog/analysis/stiffness"
	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/desk"
	livepage "gaugelog/ingest/live"
	"gaugelog/ingest/metrics"
)

// pageFlags are the flags of `record` about the live page.
type pageFlags struct {
	address, tokenFile string
	open               bool
}

func (f *pageFlags) add(fl *pflag.FlagSet) {
	fl.StringVar(&f.address, "page", "", "serve the live page at this address, such as 127.0.0.1:8700")
	fl.BoolVar(&f.open, "page-open", false, "let --page listen where other machines can reach it; everything then needs the token")
	fl.StringVar(&f.tokenFile, "page-token", "", "file whose first line is the page's token (default: a new one, printed once)")
}

// beside is everything of a recording that must never hold it up: the desks
// with their alarms, the page, and the sending to a server.
type beside struct {
	desks    []*desk.Desk
	server   *livepage.Server
	outboxes []*alarm.Outbox
	sendings []*sending
	runner   *ingest.Runner
	bank     *device.Bank
	stop     context.CancelFunc
	running  sync.WaitGroup
	mu       sync.Mutex
	err      error
	bound    chan struct{} // closed when runner and bank are set
}

// firstAnalysis is when the analysis beside a recording first runs.
const firstAnalysis = 15 * time.Second

// openBeside makes a desk for each run, and listens for the page.
func (r *recording) openBeside(f pageFlags, logger *slog.Logger, out io.Writer) (*beside, error) {
	b := &beside{bound: make(chan struct{})}
	names := map[string]int{}
	for i, rig := range r.rigs {
		name := rig.Specimen.Name
		if names[name]++; names[name] > 1 {
			name = fmt.Sprintf("%s-%d", name, names[name])
		}
		s, err := openSending(rig, r.runs[i], r.dirs[i].FS(), logger)
		if err != nil {
			return nil, err
		}
		if s != nil {
			b.sendings = append(b.sendings, s)
		}
		d, err := b.openDesk(r, i, name, logger, s)
		if err != nil {
			return nil, err
		}
		b.desks = append(b.desks, d)
	}
	if f.address == "" {
		if f.open || f.tokenFile != "" {
			return nil, wrongf("give --page ADDRESS, such as 127.0.0.1:8700", "--page-open and --page-token belong to --page")
		}
		return b, nil
	}
	token, printed := livepage.NewToken(), true
	if f.tokenFile != "" {
		var err error
		if token, err = livepage.ReadToken(f.tokenFile); err != nil {
			return nil, wrong(err, "write a token of at least 16 characters into the file")
		}
		printed = false
	}
	server, err := livepage.Listen(livepage.Options{
		Desks: b.desks, Address: f.address, Open: f.open, Token: token, Log: logger,
		Metrics: metrics.Handler(r.syncs, b.desks...),
	})
	if err != nil {
		if errors.Is(err, livepage.ErrNotLoopback) {
			return nil, wrong(fmt.Errorf("--page: %w", err), "use 127.0.0.1:PORT, or add --page-open; the page then asks everybody for the token")
		}
		return nil, wrong(fmt.Errorf("--page: %w", err), "give an address and a free port, such as 127.0.0.1:8700")
	}
	b.server = server
	fmt.Fprintf(out, "page %s\n", server.URL())
	if printed {
		fmt.Fprintf(out, "token for entering marks on the page: %s\n", token)
	}
	return b, nil
}

func (b *beside) openDesk(r *recording, i int, name string, logger *slog.Logger, s *sending) (*desk.Desk, error) {
	rig, dir, rec, run := r.rigs[i], r.dirs[i], r.recs[i], r.runs[i]
	g, _, err := stiffness.GravityOf(rig.Gravity)
	if err != nil {
		return nil, err
	}
	outbox := alarm.NewOutbox(logger, messengers(rig)...)
	b.outboxes = append(b.outboxes, outbox)
	return desk.New(desk.Options{
		Name: name, Rig: rig, FS: dir.FS(), Status: rec.Status, Gravity: g.Value,
		Happen:  func(h ingest.Happening) bool { return b.runner.Happen(i, h) },
		Mark:    func(m ingest.Mark) (string, error) { return dir.AppendMark(m, ingest.SystemClock{}) },
		Queued:  b.queued,
		Forward: s.state,
		Ports:   func() []device.PortStats { return b.portsOf(rig) },
		Analyse: outlookOf(run), AnalyseFirst: firstAnalysis,
		Outbox: outbox, Start: r.start, Log: logger,
	})
}

// messengers are the ways out that a rig file names.
func messengers(rig *config.Rig) []alarm.Messenger {
	var out []alarm.Messenger
	if c := rig.Alarms.Command; len(c) > 0 {
		out = append(out, &alarm.Command{Program: c[0], Args: c[1:]})
	}
	if u := rig.Alarms.Webhook; u != "" {
		out = append(out, &alarm.Webhook{URL: u, TokenFile: filepath.FromSlash(rig.Alarms.WebhookTokenFile)})
	}
	return out
}

func (b *beside) queued() int {
	select {
	case <-b.bound:
		return b.runner.Queued()
	default:
		return 0
	}
}

// portsOf are the ports that serve a rig.
func (b *beside) portsOf(rig *config.Rig) []device.PortStats {
	select {
	case <-b.bound:
	default:
		return nil
	}
	ours := map[string]bool{}
	for _, g := range rig.Gauges {
		ours[g.Name] = true
	}
	for _, p := range rig.Probes {
		ours[p.Name] = true
	}
	var out []device.PortStats
	for _, s := range b.bank.Stats() {
		for _, name := range s.Instruments {
			if ours[name] {
				out = append(out, s)
				break
			}
		}
	}
	return out
}

// take hands a reading to the desk of its rig.
func (b *beside) take(d device.Reading) { b.desks[d.Rig].Take(d) }

// start sets everything going. Nothing of it ends before wait.
func (b *beside) start(ctx context.Context, runner *ingest.Runner, bank *device.Bank) {
	b.runner, b.bank = runner, bank
	close(b.bound)
	ctx, b.stop = context.WithCancel(context.WithoutCancel(ctx))
	for _, d := range b.desks {
		b.running.Go(func() { d.Run(ctx) })
	}
	for _, o := range b.outboxes {
		b.running.Go(func() { o.Run(ctx) })
	}
	for _, s := range b.sendings {
		b.running.Go(func() { s.run(ctx) })
	}
	if b.server == nil {
		return
	}
	b.running.Go(func() {
		if err := b.server.Run(ctx); err != nil {
			b.mu.Lock()
			b.err = err
			b.mu.Unlock()
		}
	})
}

// wait ends everything, after the recording has ended.
func (b *beside) wait() error {
	b.stop()
	b.running.Wait()
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.err
}

// close lets go of the page's address where the recording never began.
func (b *beside) close() error {
	if b.server == nil || b.stop != nil {
		return nil
	}
	return b.server.Close()
}
