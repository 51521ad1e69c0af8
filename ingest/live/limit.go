package live

import (
	"net"
	"sync"
)

// limited is a listener with a bound on open connections. One too many is
// closed at once: waiting for room would only move the crowd into the kernel's
// queue and keep everybody out for longer.
type limited struct {
	net.Listener
	room chan struct{}
}

func limit(l net.Listener, most int) net.Listener {
	return &limited{l, make(chan struct{}, most)}
}

// Accept returns the next connection that finds room.
func (l *limited) Accept() (net.Conn, error) {
	for {
		c, err := l.Listener.Accept()
		if err != nil {
			return nil, err
		}
		select {
		case l.room <- struct{}{}:
			return &counted{Conn: c, leave: sync.OnceFunc(func() { <-l.room })}, nil
		default:
			_ = c.Close()
		}
	}
}

type counted struct {
	net.Conn
	leave func()
}

// Close makes room for another connection.
func (c *counted) Close() error {
	defer c.leave()
	return c.Conn.Close()
}
