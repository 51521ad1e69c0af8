package alarm

import "time"

// Level says how grave a cause is, in the meanings of IEC 60073's colours.
type Level uint8

// The levels. Their words stand wherever their colours do.
const (
	Normal   Level = iota // green
	Abnormal              // yellow
	Danger                // red
)

// String is the level's word.
func (l Level) String() string { return [...]string{"normal", "abnormal", "danger"}[l] }

// MarshalText writes the level's word.
func (l Level) MarshalText() ([]byte, error) { return []byte(l.String()), nil }

// rule is how a cause behaves.
type rule struct {
	level Level
	// raise and over are how long facts must ask for the alarm, or let it go.
	raise, over time.Duration
	// advice says what to do.
	advice string
}

// Safety is said with every message.
const Safety = "A software alarm is no safety device."

const keepClear = "Keep everyone clear of the load; do not go near to check."

// rules holds the causes of config.AlarmCauses.
var rules = map[string]rule{
	"clear-area":    {Danger, 0, time.Hour, keepClear},
	"sag":           {Danger, 2 * time.Second, time.Minute, keepClear},
	"catcher":       {Danger, 2 * time.Second, time.Minute, keepClear + " The load is near the catcher."},
	"span-over-sag": {Abnormal, 2 * time.Second, time.Minute, "Decide whether to unload, from a safe place."},
	"caution":       {Abnormal, 0, time.Hour, "The sag is growing faster: " + keepClear},
	"load-changed":  {Abnormal, 0, 0, "Look from a distance whether a load has moved or fallen; enter a mark if someone changed it."},
	"knock":         {Abnormal, 0, 0, "Look at the stand and the gauge, and enter a note if someone touched them."},
	"travel":        {Abnormal, 10 * time.Second, 10 * time.Minute, "Plan to reset the gauge, and enter it as an act on the gauge."},
	"silent":        {Abnormal, 2 * time.Second, 30 * time.Second, "Look at the gauge's power, cable and display."},
	"frozen":        {Abnormal, time.Minute, time.Minute, "Look whether the gauge's plunger still follows the beam."},
	"temperature":   {Abnormal, 5 * time.Minute, 5 * time.Minute, "Look at the room's heating and windows."},
	"disk":          {Abnormal, 5 * time.Second, time.Minute, "Free space on the disk or replace it; readings wait in memory for a time only."},
	"clock":         {Abnormal, 10 * time.Minute, time.Minute, "Connect the time server; stamps are put right later if the clock is set in this boot."},
	"forward":       {Abnormal, 10 * time.Second, time.Minute, "Mend the address, the token or the rights at the server; nothing is lost, and what waits is sent then."},
}

// LevelOf is how grave a cause is.
func LevelOf(cause string) Level { return rules[cause].level }

// Advice says what to do about a cause.
func Advice(cause string) string { return rules[cause].advice }
