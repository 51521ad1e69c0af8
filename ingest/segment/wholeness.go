package segment

import (
	"crypto/sha256"
	"maps"
	"slices"
	"strings"
)

// Missing names the segments that were there once and are not now: numbers
// left out between the first and the last of own segments, and segments that
// stand in SHA256SUMS. Whether one behind the last is missing cannot be told
// without SHA256SUMS.
func (d *Folder) Missing() []string {
	have, gone := map[int]bool{}, map[string]bool{}
	last := 0
	for i := range d.files {
		if f := &d.files[i]; f.number > 0 {
			have[f.number] = true
			if f.headed {
				last = max(last, f.number)
			}
		}
	}
	for n := 1; n < last; n++ {
		if !have[n] {
			gone[SegmentName(ReadingsDir, n)] = true
		}
	}
	sums, err := ReadSums(d.fs)
	if err != nil {
		sums = nil // Verify tells of a damaged SHA256SUMS
	}
	for name := range sums {
		plain := strings.TrimSuffix(name, ".zst")
		if !strings.HasPrefix(name, ReadingsDir+"/") || exists(d.fs, plain) || exists(d.fs, plain+".zst") {
			continue
		}
		gone[plain] = true
	}
	return slices.Sorted(maps.Keys(gone))
}

func exists(fs FS, name string) bool {
	f, err := fs.Open(name)
	if err != nil {
		return false
	}
	f.Close()
	return true
}

// RigEdited compares the SHA-256 of rig.yaml (64 hexadecimal digits) with what
// the headers of own segments say of it, and names the first that differs.
func (d *Folder) RigEdited(sum string) (segment string, edited bool) {
	for i := range d.files {
		f := &d.files[i]
		if f.headed && len(f.header.Rig) == 2*sha256.Size && f.header.Rig != sum {
			return f.name, true
		}
	}
	return "", false
}
