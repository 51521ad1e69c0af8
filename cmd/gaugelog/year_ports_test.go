package main

import (
	"context"
	"fmt"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
	"gaugelog/simulators/terminals"
)

// memoryPorts are simulated ports that are pieces of memory: as the conductor
// uses them they behave as pseudo-terminals do, and are faster.
type memoryPorts struct {
	opener devicetest.Opener
	names  []string
	wires  []*devicetest.Wire
}

// openMemoryPorts serves gauges that send by themselves: what is written to
// them is heard by nobody.
func openMemoryPorts(names []string, _ terminals.Heard) (simPorts, error) {
	m := &memoryPorts{names: names, wires: make([]*devicetest.Wire, len(names))}
	for i := range names {
		if _, err := m.Plug(i); err != nil {
			return nil, err
		}
	}
	return m, nil
}

func (m *memoryPorts) Write(port int, p []byte, _ time.Duration) error {
	if m.wires[port] == nil {
		return fmt.Errorf("%s: %w", m.names[port], terminals.ErrUnplugged)
	}
	m.wires[port].Send(p)
	return nil
}

func (m *memoryPorts) Plug(port int) (string, error) {
	m.wires[port] = m.opener.Plug(m.names[port])
	return m.names[port], nil
}

func (m *memoryPorts) Unplug(port int) error {
	m.wires[port] = nil
	m.opener.Unplug(m.names[port])
	return nil
}

func (m *memoryPorts) Open(ctx context.Context, port int, line config.Line) (device.Port, error) {
	return m.opener.Open(ctx, m.names[port], line)
}

func (m *memoryPorts) Close() error {
	for i := range m.names {
		m.opener.Unplug(m.names[i])
	}
	return nil
}
