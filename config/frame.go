package config

// Line is the setting of a serial line.
type Line struct {
	Baud     int    `mapstructure:"baud"`      // default 9600
	DataBits int    `mapstructure:"data_bits"` // 5..8, default 8
	Parity   string `mapstructure:"parity"`    // none (default) | even | odd | mark | space
	StopBits string `mapstructure:"stop_bits"` // "1" (default) | "1.5" | "2"
	DTR      string `mapstructure:"dtr"`       // "" (as the driver leaves it) | on | off
	RTS      string `mapstructure:"rts"`
}

// Frame describes what an instrument sends, from its own manual. Which fields
// count depends on Kind; config checks that the others are absent.
type Frame struct {
	Name string `mapstructure:"name"`
	Kind string `mapstructure:"kind"` // text | nibbles | binary | modbus | scpi
	Line Line   `mapstructure:"line"`

	// Asked instruments (text, nibbles, binary; modbus and scpi always).
	Request string    `mapstructure:"request"` // bytes, Go escapes; {channel} stands for the gauge's channel
	Every   *Duration `mapstructure:"every"`   // default 1 s for asked instruments
	Timeout *Duration `mapstructure:"timeout"` // default 500 ms
	// Button is true where the instrument sends only when its button or a
	// foot switch is pressed.
	Button bool `mapstructure:"button"`

	// Text frames.
	Start   string `mapstructure:"start"` // optional first bytes
	End     string `mapstructure:"end"`
	Pattern string `mapstructure:"pattern"`
	Unit    string `mapstructure:"unit"`    // mm | in, where the frame sends none (every kind)
	Longest int    `mapstructure:"longest"` // longest frame in bytes, default 256
	// Units, Statuses and NoReadings translate what the instrument prints.
	Units      map[string]string `mapstructure:"units"`       // e.g. {"\"": in}
	Statuses   map[string]string `mapstructure:"statuses"`    // e.g. {H: hold, B: battery-low}
	NoReadings map[string]string `mapstructure:"no_readings"` // whole texts that are no number, e.g. {Err: over-range}

	Checksum *Checksum `mapstructure:"checksum"`

	Nibbles *Nibbles `mapstructure:"nibbles"`
	Binary  *Binary  `mapstructure:"binary"`
	Modbus  *Modbus  `mapstructure:"modbus"`
	SCPI    *SCPI    `mapstructure:"scpi"`
}

// Checksum guards a frame.
type Checksum struct {
	Kind string `mapstructure:"kind"` // none | sum8 | xor8 | twos-complement | crc16
	// From and To are byte offsets of the stretch covered, To exclusive;
	// negative counts from the end of the frame (without its terminator).
	// For text frames the default is all bytes before the sum group.
	From  *int   `mapstructure:"from"`
	To    *int   `mapstructure:"to"`
	At    *int   `mapstructure:"at"`    // byte at which the sum stands (binary, nibbles), counted from the frame's first, start included; negative from its end, which lies before end; nibbles: left out where it follows them
	Form  string `mapstructure:"form"`  // hex (default for text) | binary
	Order string `mapstructure:"order"` // crc16: low-first (default) | high-first
}

// Nibbles is a frame of decimal digits, packed two to a byte or one hex
// character each.
type Nibbles struct {
	Count  int          `mapstructure:"count"`  // nibbles in a frame
	Coding string       `mapstructure:"coding"` // packed | hex
	Order  string       `mapstructure:"order"`  // high-first (default) | low-first, within a byte
	Header string       `mapstructure:"header"` // fixed nibbles at the front, as hex digits
	Sign   *NibbleField `mapstructure:"sign"`
	Digits NibbleSpan   `mapstructure:"digits"`
	Point  *NibbleField `mapstructure:"point"`
	Unit   *NibbleField `mapstructure:"unit"`
	Status *NibbleField `mapstructure:"status"`
}

// NibbleField is one nibble with a closed set of codes: the code, as a hex
// digit, and what it means (sign: "+" "-"; point: digits behind it; unit: mm in).
type NibbleField struct {
	At    int               `mapstructure:"at"`
	Codes map[string]string `mapstructure:"codes"`
}

// NibbleSpan is where the digits stand.
type NibbleSpan struct {
	At    int    `mapstructure:"at"`
	Count int    `mapstructure:"count"`
	First string `mapstructure:"first"` // most (default) | least significant digit first
	// Decimals is the number of digits behind the point where no nibble says so.
	Decimals int `mapstructure:"decimals"`
}

// Binary is a frame of fixed length.
type Binary struct {
	Length int     `mapstructure:"length"`
	Sync   string  `mapstructure:"sync"` // hex bytes at the front
	Offset int     `mapstructure:"offset"`
	Width  int     `mapstructure:"width"` // bytes: 1 2 3 4 8
	Order  string  `mapstructure:"order"` // big | little
	Type   string  `mapstructure:"type"`  // signed | unsigned | float
	Scale  *Number `mapstructure:"scale"` // shown = raw * scale
	Flags  []Flag  `mapstructure:"flags"`
}

// Flag is one bit of a binary frame.
type Flag struct {
	Byte  int    `mapstructure:"byte"`
	Bit   int    `mapstructure:"bit"`
	Means string `mapstructure:"means"` // negative | in | hold | battery-low | over-range | under-range | high-limit | low-limit
}

// Modbus is a read of registers (RTU).
type Modbus struct {
	Function   string            `mapstructure:"function"` // holding (3) | input (4)
	Address    *int              `mapstructure:"address"`  // bus address, 1..247; default the gauge's channel
	Register   int               `mapstructure:"register"`
	Type       string            `mapstructure:"type"`       // int16 uint16 int32 uint32 float32
	WordOrder  string            `mapstructure:"word_order"` // high-first (default) | low-first
	Scale      *Number           `mapstructure:"scale"`
	Status     *int              `mapstructure:"status"`      // a register with status bits read in the same request
	StatusBits map[string]string `mapstructure:"status_bits"` // bit number: meaning
}

// SCPI is a query in the open SCPI / IEEE 488.2 style.
type SCPI struct {
	Query    string  `mapstructure:"query"`
	Scale    *Number `mapstructure:"scale"`
	Identity string  `mapstructure:"identity"` // pattern the answer to *IDN? must match; empty: not asked
}
