package frame

import (
	"errors"
	"fmt"
	"math"
	"strconv"
)

// modbusShape reads answers to a read of registers (MODBUS Application
// Protocol V1.1b3, 6.3 and 6.4: address, function, byte count, registers, high
// byte first; 7: exceptions), each closed by the CRC of the serial line
// specification, low byte first. The 3.5 characters of silence that bound a
// frame cannot be seen through a USB bridge: the length expected and the CRC
// bound it.
type modbusShape struct {
	o       *ModbusOptions
	unit    Unit
	bits    [16]string
	address []byte // as Frame.Channel shows it
	scratch [32]byte
}

// The lengths of an answer: address, function, count or code, and CRC.
const (
	modbusFixed   = 5
	modbusLongest = modbusFixed + 2*125
)

func newModbus(o Options) (Decoder, error) {
	m := o.Modbus
	if m == nil {
		return nil, errors.New("a modbus frame needs its registers: function, address, register and type")
	}
	width, err := m.width()
	switch {
	case err != nil:
		return nil, err
	case m.Function != 3 && m.Function != 4:
		return nil, fmt.Errorf("modbus function %d: 3 (holding) and 4 (input) are known", m.Function)
	case m.Address < 1 || m.Address > 247:
		return nil, fmt.Errorf("bus address %d: addresses are 1 to 247", m.Address)
	case m.Registers < 1 || m.Registers > 125:
		return nil, fmt.Errorf("%d registers in one answer: 1 to 125 are possible", m.Registers)
	case m.ValueAt < 0 || m.ValueAt+width > m.Registers || m.StatusAt >= m.Registers:
		return nil, fmt.Errorf("the value or the status does not lie in the %d registers read", m.Registers)
	case o.Unit == NoUnit:
		return nil, errors.New("the registers carry no unit: give unit: mm or in")
	case m.Scale.Digits == 0:
		return nil, errors.New("the scale is zero")
	}
	s := &modbusShape{o: m, unit: o.Unit, address: strconv.AppendInt(nil, int64(m.Address), 10)}
	for bit, word := range m.StatusBits {
		if bit < 0 || bit > 15 {
			return nil, fmt.Errorf("status bit %d: a register has bits 0 to 15", bit)
		}
		s.bits[bit] = word
	}
	return newFramer(s, proven, 1, modbusLongest), nil
}

// width is the number of registers of the value.
func (m *ModbusOptions) width() (int, error) {
	switch m.Type {
	case "int16", "uint16":
		return 1, nil
	case "int32", "uint32", "float32":
		return 2, nil
	}
	return 0, fmt.Errorf("modbus type %q: int16, uint16, int32, uint32 and float32 are known", m.Type)
}

// size knows answers from any address, so that a late one is told from
// damage, and exceptions.
func (s *modbusShape) size(b []byte) (int, bool) {
	if b[0] < 1 || b[0] > 247 {
		return 0, false
	}
	if len(b) < 2 {
		return 0, true
	}
	switch b[1] {
	case 0x83, 0x84:
		return modbusFixed, true
	case 3, 4:
		if len(b) < 3 {
			return 0, true
		}
		return modbusFixed + int(b[2]), b[2] > 0 && b[2]%2 == 0 && b[2] <= 250
	}
	return 0, false
}

func (s *modbusShape) read(f *Frame) (Reason, bool) {
	n := len(f.Raw) - 2
	if crc := CRC16(f.Raw[:n]); f.Raw[n] != byte(crc) || f.Raw[n+1] != byte(crc>>8) {
		return BadChecksum, false
	}
	switch {
	case f.Raw[0] != s.o.Address:
		return BadAddress, true
	case f.Raw[1] == s.o.Function|0x80:
		f.Exception = f.Raw[2]
		return Refused, true
	case f.Raw[1] != s.o.Function || int(f.Raw[2]) != 2*s.o.Registers:
		return NoMatch, true
	}
	f.Channel, f.Unit = s.address, s.unit
	if s.o.StatusAt >= 0 {
		word := s.register(f, s.o.StatusAt)
		for bit, means := range s.bits {
			if means != "" && word&(1<<bit) != 0 {
				f.Status = graver(f.Status, means)
			}
		}
	}
	return s.value(f), true
}

func (s *modbusShape) register(f *Frame, i int) uint16 {
	return uint16(f.Raw[3+2*i])<<8 | uint16(f.Raw[4+2*i])
}

func (s *modbusShape) value(f *Frame) Reason {
	first := s.register(f, s.o.ValueAt)
	switch s.o.Type {
	case "int16":
		return readInteger(f, Decimal{Digits: int64(int16(first))}, s.o.Scale)
	case "uint16":
		return readInteger(f, Decimal{Digits: int64(first)}, s.o.Scale)
	}
	high, low := first, s.register(f, s.o.ValueAt+1)
	if s.o.LowFirst {
		high, low = low, high
	}
	both := uint32(high)<<16 | uint32(low)
	switch s.o.Type {
	case "int32":
		return readInteger(f, Decimal{Digits: int64(int32(both))}, s.o.Scale)
	case "uint32":
		return readInteger(f, Decimal{Digits: int64(both)}, s.o.Scale)
	}
	return readFloat(f, float64(math.Float32frombits(both)), 32, s.o.Scale, s.scratch[:])
}

// ModbusRequest returns the question for count registers from register on
// (MODBUS Application Protocol V1.1b3, 6.3 and 6.4), with its CRC. Function is
// 3 or 4, address 1 to 247.
func ModbusRequest(address, function byte, register, count uint16) []byte {
	b := []byte{address, function, byte(register >> 8), byte(register), byte(count >> 8), byte(count)}
	crc := CRC16(b)
	return append(b, byte(crc), byte(crc>>8))
}

// ExceptionText says what an exception code means (MODBUS Application
// Protocol V1.1b3, 7).
func ExceptionText(code byte) string {
	switch code {
	case 1:
		return "illegal function"
	case 2:
		return "illegal data address"
	case 3:
		return "illegal data value"
	case 4:
		return "server device failure"
	case 5:
		return "acknowledge"
	case 6:
		return "server device busy"
	case 8:
		return "memory parity error"
	case 10:
		return "gateway path unavailable"
	case 11:
		return "gateway target device failed to respond"
	}
	return "exception code " + strconv.Itoa(int(code))
}
