package live

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"os"
	"time"

	"gaugelog/ingest/desk"
)

// Limits of the server. Go's own have no time-outs at all.
const (
	headerWithin = 5 * time.Second
	readWithin   = 10 * time.Second
	writeWithin  = 15 * time.Second
	idleWithin   = 60 * time.Second
	largestHead  = 16 << 10
	largestBody  = 16 << 10

	// mostConnections bounds all connections, mostStreams those that stay
	// open for updates; the rest is left for pages and marks.
	mostConnections = 64
	mostStreams     = 32
)

// Options is what a Server needs.
type Options struct {
	// Desks are the runs shown, each by its own name.
	Desks []*desk.Desk
	// Address is where to listen, such as 127.0.0.1:8700 (port 0: any free).
	Address string
	// Open allows an address other machines can reach. Everything then needs
	// the token, looking included.
	Open bool
	// Token lets a person enter marks; see NewToken and ReadToken.
	Token string
	// Metrics, where not nil, answers /metrics.
	Metrics http.Handler
	Log     *slog.Logger
}

// Server is the live page of one process.
type Server struct {
	o        Options
	listener net.Listener
	http     *http.Server
	guard    *guard
	pages    map[string]*page
	streams  chan struct{}
	ending   context.Context
	end      context.CancelFunc
}

// ErrNotLoopback says that the address can be reached from other machines and
// nobody asked for that.
var ErrNotLoopback = errors.New("the address can be reached from other machines")

// Listen checks the options and opens the address. Errors: ErrNotLoopback, a
// token that is too short, an address that cannot be had.
func Listen(o Options) (*Server, error) {
	if len(o.Token) < shortestToken {
		return nil, fmt.Errorf("the page's token has %d characters, at least %d are needed", len(o.Token), shortestToken)
	}
	if o.Log == nil {
		o.Log = slog.New(slog.DiscardHandler)
	}
	host, _, err := net.SplitHostPort(o.Address)
	if err != nil {
		return nil, fmt.Errorf("the page's address: %w", err)
	}
	if !o.Open && !loopback(host) {
		return nil, fmt.Errorf("%s: %w", o.Address, ErrNotLoopback)
	}
	l, err := net.Listen("tcp", o.Address)
	if err != nil {
		return nil, fmt.Errorf("the page's address: %w", err)
	}
	s := &Server{o: o, listener: limit(l, mostConnections), pages: map[string]*page{}, streams: make(chan struct{}, mostStreams)}
	s.ending, s.end = context.WithCancel(context.Background())
	s.guard = newGuard(o.Token, o.Open, hostNames(o.Open))
	for _, d := range o.Desks {
		s.pages[d.Name()] = newPage(d)
	}
	s.http = &http.Server{
		Handler:           s.handler(),
		ReadHeaderTimeout: headerWithin, ReadTimeout: readWithin, WriteTimeout: writeWithin, IdleTimeout: idleWithin,
		MaxHeaderBytes: largestHead,
		ErrorLog:       slog.NewLogLogger(o.Log.Handler(), slog.LevelDebug),
		BaseContext:    func(net.Listener) context.Context { return s.ending },
	}
	return s, nil
}

// loopback reports whether a host is this machine alone.
func loopback(host string) bool {
	if host == "localhost" {
		return true
	}
	ip := net.ParseIP(host)
	return ip != nil && ip.IsLoopback()
}

// hostNames are the names by which the page may be asked for, beside any
// address written in digits.
func hostNames(open bool) []string {
	names := []string{"localhost"}
	if name, err := os.Hostname(); open && err == nil {
		names = append(names, name, name+".local")
	}
	return names
}

// URL is the page's address.
func (s *Server) URL() string {
	host, port, _ := net.SplitHostPort(s.listener.Addr().String())
	if ip := net.ParseIP(host); ip != nil && ip.IsUnspecified() {
		host = "localhost"
		if name, err := os.Hostname(); err == nil {
			host = name
		}
	}
	return "http://" + net.JoinHostPort(host, port) + "/"
}

// Run serves until the context ends, then lets go of all connections.
func (s *Server) Run(ctx context.Context) error {
	served := make(chan error, 1)
	go func() { served <- s.http.Serve(s.listener) }()
	select {
	case err := <-served:
		s.end()
		return fmt.Errorf("the page: %w", err)
	case <-ctx.Done():
	}
	s.end() // ends the streams
	closing, stop := context.WithTimeout(context.WithoutCancel(ctx), 2*time.Second)
	defer stop()
	if err := s.http.Shutdown(closing); err != nil {
		err = s.http.Close()
		<-served
		return err
	}
	<-served
	return nil
}

// Close lets go of the address of a server that was never run.
func (s *Server) Close() error {
	s.end()
	return s.listener.Close()
}
