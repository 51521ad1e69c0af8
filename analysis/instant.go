package analysis

import "time"

// instantLayout is RFC 3339 in UTC with all nine decimals, so that instants
// sort as text and compare byte for byte.
const instantLayout = "2006-01-02T15:04:05.000000000Z07:00"

// instant prints nanoseconds since 1970 UTC as the result writes instants.
func instant(ns int64) string { return time.Unix(0, ns).UTC().Format(instantLayout) }

// instantOrNil is instant, nil for the 0 that means "none".
func instantOrNil(ns int64) *string {
	if ns == 0 {
		return nil
	}
	s := instant(ns)
	return &s
}

// seconds turns a difference of instants into seconds.
func seconds(ns int64) float64 { return float64(ns) / 1e9 }
