package main

import (
	"context"
	"fmt"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/simulators/terminals"
)

// simPorts are the simulated ports, in the order of their names.
type simPorts interface {
	// Write puts bytes on a port; patience is that of [terminals.Bank.Write].
	Write(port int, p []byte, patience time.Duration) error
	Plug(port int) (path string, err error)
	Unplug(port int) error
	// Open opens a port for the device code.
	Open(ctx context.Context, port int, line config.Line) (device.Port, error)
	Close() error
}

// Open opens the simulated port of a name, wherever it is now.
func (c *conductor) Open(ctx context.Context, name string, line config.Line) (device.Port, error) {
	if l := c.byPort[name]; l != nil {
		return c.terms.Open(ctx, l.index, line)
	}
	return nil, fmt.Errorf("no simulated port is called %s", name)
}

// terminalPorts are ports on pseudo-terminals.
type terminalPorts struct{ *terminals.Bank }

func openTerminals(names []string, heard terminals.Heard) (simPorts, error) {
	bank, err := terminals.Open(names, heard)
	return terminalPorts{bank}, err
}

func (t terminalPorts) Open(ctx context.Context, port int, line config.Line) (device.Port, error) {
	at := t.Terminals()[port]
	if at.Path == "" {
		return nil, fmt.Errorf("port %s is unplugged", at.Name)
	}
	return device.SystemOpener{}.Open(ctx, at.Path, line)
}

// unplug takes a port away and waits until the device has noticed, for every
// rig that uses it.
func (c *conductor) unplug(ctx context.Context, l *simLine) error {
	if err := c.terms.Unplug(l.index); err != nil || !c.powered() {
		return err
	}
	ctx, stop := context.WithTimeoutCause(ctx, patience, fmt.Errorf("nobody noticed that port %s was unplugged", l.name))
	defer stop()
	for c.lost(l.name) < len(l.rigs) {
		select {
		case <-c.news:
		case <-ctx.Done():
			return context.Cause(ctx)
		}
	}
	return c.deliver()
}

// lost counts the rigs that were told of a port's loss and have not been
// handed the news yet.
func (c *conductor) lost(port string) (n int) {
	c.mu.Lock()
	defer c.mu.Unlock()
	for _, r := range c.readings {
		if r.Kind == device.PortLost && r.Port == port {
			n++
		}
	}
	return n
}

// plug brings a port back and waits until the device has opened it.
func (c *conductor) plug(ctx context.Context, l *simLine) error {
	if _, err := c.terms.Plug(l.index); err != nil || !c.powered() {
		return err
	}
	for began := time.Now(); ; {
		for _, s := range c.bank.Stats() {
			if s.Port == l.name && s.Open {
				return nil
			}
		}
		if time.Since(began) > patience {
			return fmt.Errorf("nobody opened port %s again after it was plugged", l.name)
		}
		select {
		case <-time.After(time.Millisecond):
		case <-ctx.Done():
			return ctx.Err()
		}
	}
}
