package config

// Amendment is one thing learned or decided after the run began: the value at
// Path counts from Since (or from the beginning, where Since is empty).
type Amendment struct {
	Path    string `mapstructure:"path"`
	Value   any    `mapstructure:"value"`
	Since   string `mapstructure:"since"` // RFC 3339
	Why     string `mapstructure:"why"`
	By      string `mapstructure:"by"`
	Entered string `mapstructure:"entered"` // RFC 3339
	// Shown is the value's own text as it stands in the file.
	Shown string
}
