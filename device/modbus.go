package device

import (
	"fmt"
	"strconv"

	"gaugelog/config"
	"gaugelog/device/frame"
)

// registers is what one question reads: count registers from first on.
type registers struct{ first, count int }

// registersOf covers the value and, where there is one, the status register.
func registersOf(m *config.Modbus) (registers, error) {
	width := 1
	switch m.Type {
	case "int32", "uint32", "float32":
		width = 2
	}
	r := registers{m.Register, width}
	last := m.Register + width - 1
	if m.Status != nil {
		r.first, last = min(r.first, *m.Status), max(last, *m.Status)
	}
	r.count = last - r.first + 1
	if r.first < 0 || last > 65535 || r.count > 125 {
		return r, fmt.Errorf("registers %d to %d cannot be read at once: they count from 0 to 65535, at most 125 a question", r.first, last)
	}
	return r, nil
}

// addressOf is the bus address: the frame's, else the gauge's channel.
func addressOf(m *config.Modbus, channel string) (byte, error) {
	n := 0
	if m.Address != nil {
		n = *m.Address
	} else if v, err := strconv.Atoi(channel); err == nil {
		n = v
	} else {
		return 0, fmt.Errorf("channel %q is no bus address: write 1 to 247", channel)
	}
	if n < 1 || n > 247 {
		return 0, fmt.Errorf("bus address %d: addresses are 1 to 247", n)
	}
	return byte(n), nil
}

func functionOf(m *config.Modbus) (byte, error) {
	switch m.Function {
	case "holding":
		return 3, nil
	case "input":
		return 4, nil
	}
	return 0, fmt.Errorf("modbus function %q: holding and input are known", m.Function)
}

func modbusRequest(m *config.Modbus, channel string) ([]byte, error) {
	if m == nil {
		return nil, fmt.Errorf("a modbus frame needs its modbus group")
	}
	r, err := registersOf(m)
	if err != nil {
		return nil, err
	}
	address, err := addressOf(m, channel)
	if err != nil {
		return nil, err
	}
	function, err := functionOf(m)
	if err != nil {
		return nil, err
	}
	return frame.ModbusRequest(address, function, uint16(r.first), uint16(r.count)), nil
}

func modbusOf(m *config.Modbus, channel string) (*frame.ModbusOptions, error) {
	if m == nil {
		return nil, fmt.Errorf("a modbus frame needs its modbus group")
	}
	r, err := registersOf(m)
	if err != nil {
		return nil, err
	}
	o := &frame.ModbusOptions{
		Registers: r.count, ValueAt: m.Register - r.first, StatusAt: -1,
		Type: m.Type, LowFirst: m.WordOrder == "low-first", StatusBits: map[int]string{},
	}
	if m.Status != nil {
		o.StatusAt = *m.Status - r.first
	}
	if o.Address, err = addressOf(m, channel); err != nil {
		return nil, err
	}
	if o.Function, err = functionOf(m); err != nil {
		return nil, err
	}
	if o.Scale, err = scaleOf(m.Scale); err != nil {
		return nil, err
	}
	for bit, word := range m.StatusBits {
		n, err := strconv.Atoi(bit)
		if err != nil || !knownStatus(word) {
			return nil, fmt.Errorf("status bit %q: %q: bits are 0 to 15, and the words those of a status", bit, word)
		}
		o.StatusBits[n] = word
	}
	return o, nil
}
