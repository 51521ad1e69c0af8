package analysis

import (
	"maps"
	"slices"
)

// sortedNames is a map's keys in order: sums and lists over a map must not
// depend on its own order.
func sortedNames[V any](m map[string]V) []string { return slices.Sorted(maps.Keys(m)) }
