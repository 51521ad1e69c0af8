package wire

// The Modbus application protocol (V1.1b3), section 6.3 and 6.4: at most 125
// registers are read at once; section 7: the exception codes.
const (
	mostRegisters   = 125
	illegalFunction = 1
	illegalAddress  = 2
	illegalValue    = 3
	deviceFailure   = 4
)

// Call is a request heard on a Modbus line.
type Call struct {
	Address  byte
	Function byte
	First    int    // of the registers, functions 3 and 4
	Count    int    // of the registers, functions 3 and 4
	Raw      []byte // the request itself; belongs to the bytes heard
}

// FindCall finds the first whole request among bytes heard on a Modbus line
// and where it ends. Bytes that belong to no request with a right CRC are
// passed over, as a slave does that hears noise.
func FindCall(heard []byte) (c Call, end int, ok bool) {
	for from := 0; from+4 <= len(heard); from++ {
		for _, size := range callSizes(heard[from:]) {
			if size > len(heard)-from {
				continue
			}
			raw := heard[from : from+size]
			crc := crc16(raw[:size-2])
			if raw[size-2] != byte(crc) || raw[size-1] != byte(crc>>8) {
				continue
			}
			c = Call{Address: raw[0], Function: raw[1], Raw: raw}
			if size == 8 {
				c.First, c.Count = int(raw[2])<<8|int(raw[3]), int(raw[4])<<8|int(raw[5])
			}
			return c, from + size, true
		}
	}
	return Call{}, 0, false
}

// callSizes are the sizes, in bytes with address and CRC, that a request of
// this function may have (the same specification, section 6).
func callSizes(b []byte) []int {
	switch b[1] {
	case 1, 2, 3, 4, 5, 6, 8:
		return []int{8}
	case 7, 11, 12, 17:
		return []int{4}
	case 15, 16:
		if len(b) > 6 {
			return []int{9 + int(b[6])}
		}
		return nil
	case 22:
		return []int{10}
	case 23:
		if len(b) > 10 {
			return []int{13 + int(b[10])}
		}
		return nil
	}
	return []int{8, 4, 5, 6, 7}
}

// AppendAnswer appends what the slave answers to a call; parts are the
// instruments that share its address and read gives what one of them shows at
// this instant. With the answer it says which of them had their whole number
// in it. A broadcast (address 0) and a call for another address get nothing.
func AppendAnswer(dst []byte, c Call, parts []Registers, read func(part int) *Value) (out []byte, whole []int) {
	begin := len(dst)
	refuse := func(code byte) ([]byte, []int) {
		return appendCRC(append(dst[:begin], c.Address, c.Function|0x80, code), begin), nil
	}
	switch {
	case len(parts) == 0 || c.Address != parts[0].Address():
		return dst, nil
	case c.Function != 3 && c.Function != 4:
		return refuse(illegalFunction)
	case c.Count < 1 || c.Count > mostRegisters:
		return refuse(illegalValue)
	case !served(c, parts):
		return refuse(illegalAddress)
	}
	words := make([]uint16, c.Count)
	for i, part := range parts {
		function, first, count := part.Span()
		if function != c.Function || first >= c.First+c.Count || first+count <= c.First {
			continue
		}
		span := make([]uint16, count)
		if !part.Fill(span, read(i)) {
			return refuse(deviceFailure)
		}
		for j, word := range span {
			if at := first + j - c.First; at >= 0 && at < c.Count {
				words[at] |= word
			}
		}
		if value, size := part.Value(); value >= c.First && value+size <= c.First+c.Count {
			whole = append(whole, i)
		}
	}
	dst = append(dst, c.Address, c.Function, byte(2*c.Count))
	for _, word := range words {
		dst = append(dst, byte(word>>8), byte(word))
	}
	return appendCRC(dst, begin), whole
}

// served tells whether every register asked for is one of the slave's.
func served(c Call, parts []Registers) bool {
	for at := c.First; at < c.First+c.Count; at++ {
		found := false
		for _, part := range parts {
			function, first, count := part.Span()
			found = found || function == c.Function && at >= first && at < first+count
		}
		if !found {
			return false
		}
	}
	return true
}
