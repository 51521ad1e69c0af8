package segment

// Kind is the measurement of a line.
type Kind uint8

// The measurements of a run folder. Other is any measurement not named here;
// it is kept, and its Point tells what it is.
const (
	Indication Kind = iota // indication,gauge=NAME mm=...
	Ambient                // ambient,probe=NAME celsius=...,humidity_percent=...
	Load                   // load,name=NAME newton=...
	Note                   // note text="..."
	Touch                  // touch,gauge=NAME act="..."
	Withdraw               // withdraw id="...",why="..."
	Event                  // event,kind=KIND[,gauge=NAME] detail="..."
	StepMark               // step name="..."
	Other
)

// Record is the segment reader's record, the one type that crosses from the
// run folder to the analysis.
type Record struct {
	Kind Kind
	// Name is the value of the line's naming tag: the gauge, probe, load or
	// event kind; interned, so equal names share storage.
	Name string
	// Time is nanoseconds since 1970 UTC, re-timed by the rule in FORMAT.md
	// where the clock had not been set; Raw is the stamp as it stands in the file.
	Time, Raw int64
	// MM is the indication in mm (Kind Indication only).
	MM float64
	// Point holds every tag and field of any other line, and of an indication
	// that carries more than mm; nil otherwise.
	Point *Point
}

// Point is a decoded line. Values are string, float64, int64, uint64 or bool.
type Point struct {
	Measurement string
	Tags        []Tag
	Fields      []Field
}

// Tag is one tag of a line.
type Tag struct{ Key, Value string }

// Field is one field of a line.
type Field struct {
	Key   string
	Value any
}
