package config

import (
	"maps"
	"reflect"
	"slices"
	"strings"
)

func keyNames(keys map[string]reflect.Type) []string {
	return slices.Sorted(maps.Keys(keys))
}

// nearestMend proposes the known word nearest to an unknown one, or lists the
// known ones where none is near.
func nearestMend(word string, known []string) string {
	if len(known) == 0 {
		return "there is none; add it first, or take this out"
	}
	if near := nearest(word, known); near != "" {
		return "did you mean " + near + "?"
	}
	if len(known) == 1 {
		return "known here: " + known[0]
	}
	return "known here: " + strings.Join(known, ", ")
}

// nearest returns the known word with the smallest edit distance, ignoring
// case, hyphens and underscores, and of equals the one that begins alike for
// longer; "" if more than a third of its letters differ, or any of a word of
// two (mm is no mend for cm).
func nearest(word string, known []string) string {
	best, bestDistance, bestAlike := "", 1<<30, 0
	for _, k := range known {
		d, same := distance([]rune(flat(word)), []rune(flat(k))), alike(flat(word), flat(k))
		if d < bestDistance || d == bestDistance && same > bestAlike {
			best, bestDistance, bestAlike = k, d, same
		}
	}
	switch letters := len([]rune(best)); {
	case letters <= 2 && bestDistance > 0, bestDistance > max(1, letters/3):
		return ""
	}
	return best
}

// alike counts the bytes that two words have in common at the front.
func alike(a, b string) int {
	n := 0
	for n < min(len(a), len(b)) && a[n] == b[n] {
		n++
	}
	return n
}

func flat(s string) string {
	return strings.NewReplacer("_", "", "-", "", " ", "").Replace(strings.ToLower(s))
}

// distance is the edit distance of two words with neighbours' exchange
// (optimal string alignment); words longer than 64 are cut, which keeps the
// work bounded and cannot make two unlike words alike.
func distance(a, b []rune) int {
	a, b = a[:min(len(a), 64)], b[:min(len(b), 64)]
	rows := make([][]int, len(a)+1)
	for i := range rows {
		rows[i] = make([]int, len(b)+1)
		rows[i][0] = i
	}
	for j := range rows[0] {
		rows[0][j] = j
	}
	for i := 1; i <= len(a); i++ {
		for j := 1; j <= len(b); j++ {
			cost := 1
			if a[i-1] == b[j-1] {
				cost = 0
			}
			rows[i][j] = min(rows[i-1][j]+1, rows[i][j-1]+1, rows[i-1][j-1]+cost)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				rows[i][j] = min(rows[i][j], rows[i-2][j-2]+1)
			}
		}
	}
	return rows[len(a)][len(b)]
}

// sortedKeys gives the messages about a map one order.
func sortedKeys(m map[string]string) []string { return slices.Sorted(maps.Keys(m)) }
