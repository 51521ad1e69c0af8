package segment

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"maps"
	"slices"
)

// RigFile is the rig file's name in a run folder.
const RigFile = "rig.yaml"

// Verified is what Verify found.
type Verified struct {
	Report
	// Files counts the files looked at, Bytes their stored bytes.
	Files int
	Bytes int64
	// Summed counts the files whose SHA-256 matched SHA256SUMS.
	Summed int
}

// Whole tells whether nothing is damaged. Unfinished tails are no damage.
func (v *Verified) Whole() bool { return len(v.Damage) == 0 }

// Verify reads a whole run folder and changes nothing: every block of every
// segment and log, every hash in SHA256SUMS, and the rig file against the hash
// that every header carries. The error is for a folder that cannot be listed;
// damage stands in the result.
func Verify(fs FS) (*Verified, error) {
	d, err := OpenFolder(fs)
	if err != nil {
		return nil, err
	}
	v := new(Verified)
	if err := v.readings(d); err != nil {
		return nil, err
	}
	for _, name := range []string{MarksFile, EventsFile} {
		_, report, err := d.Log(name)
		if err != nil {
			return nil, err
		}
		v.add(report)
		v.count(fs, name)
	}
	v.rig(d)
	v.sums(fs)
	return v, nil
}

func (v *Verified) add(r *Report) {
	v.Damage = append(v.Damage, r.Damage...)
	v.Tails = append(v.Tails, r.Tails...)
	v.Retimed = append(v.Retimed, r.Retimed...)
	v.Unset = append(v.Unset, r.Unset...)
	v.Quarantined = append(v.Quarantined, r.Quarantined...)
	v.Readings += r.Readings
	v.Lines += r.Lines
}

func (v *Verified) count(fs FS, name string) {
	f, err := fs.Open(name)
	if err != nil {
		return
	}
	defer f.Close()
	if info, err := f.Stat(); err == nil {
		v.Files++
		v.Bytes += info.Size()
	}
}

func (v *Verified) readings(d *Folder) error {
	r := d.Read(ReadOptions{})
	defer r.Close()
	for {
		if _, err := r.Next(); err == io.EOF {
			break
		} else if err != nil {
			return err
		}
	}
	v.add(r.Report())
	for i := range d.files {
		f := &d.files[i]
		v.count(d.fs, f.name)
		if f.headed && f.number > 0 && f.header.Number != f.number {
			v.Damage = append(v.Damage, Damage{File: f.name,
				Why: fmt.Sprintf("its header says it is segment %d: was it renamed?", f.header.Number)})
		}
	}
	return nil
}

// rig compares rig.yaml with what the headers of own segments say of it.
func (v *Verified) rig(d *Folder) {
	sum, err := hashFile(d.fs, RigFile)
	if err != nil {
		v.Damage = append(v.Damage, Damage{File: RigFile, Why: "cannot be read: " + err.Error()})
		return
	}
	v.count(d.fs, RigFile)
	if name, edited := d.RigEdited(sum); edited {
		v.Damage = append(v.Damage, Damage{File: RigFile,
			Why: fmt.Sprintf("its SHA-256 is %s, but %s was recorded with another: it was edited since", sum, name)})
	}
	summed, err := ReadSums(d.fs)
	for _, name := range d.Missing() {
		_, plain := summed[name]
		_, packed := summed[name+".zst"]
		if err != nil || !plain && !packed { // those in SHA256SUMS are told of there
			v.Damage = append(v.Damage, Damage{File: name, Lines: -1, Why: "its number is left out between its neighbours: it is missing"})
		}
	}
}

// sums checks SHA256SUMS. A log that has grown since it was summed is whole if
// the hash is that of one of its own checkpoints.
func (v *Verified) sums(fs FS) {
	sums, err := ReadSums(fs)
	if err != nil {
		v.Damage = append(v.Damage, Damage{File: SumsFile, Why: err.Error()})
		return
	}
	v.count(fs, SumsFile)
	for _, name := range slices.Sorted(maps.Keys(sums)) {
		got, err := hashFile(fs, name)
		if isNotExist(err) {
			// It may have been compressed since: what it unpacks to counts.
			if text, terr := hashUnpacked(fs, name+".zst"); terr == nil {
				got, err = text, nil
			}
		}
		switch {
		case isNotExist(err):
			v.Damage = append(v.Damage, Damage{File: name, Lines: -1, Why: "it stands in SHA256SUMS but is missing"})
		case err != nil:
			v.Damage = append(v.Damage, Damage{File: name, Lines: -1, Why: "cannot be read: " + err.Error()})
		case got == sums[name] || (name == MarksFile || name == EventsFile) && grown(fs, name, sums[name]):
			v.Summed++
		default:
			v.Damage = append(v.Damage, Damage{File: name, Lines: 0,
				Why: fmt.Sprintf("its SHA-256 is %s, SHA256SUMS says %s", got, sums[name])})
		}
	}
}

// grown tells whether sum is the hash of a log up to one of its comments, or up
// to the unfinished tail before one.
func grown(fs FS, name, sum string) bool {
	text, err := ReadFile(fs, name)
	if err != nil {
		return false
	}
	h := sha256.New()
	done := 0
	for _, it := range splitBlocks(text, nil) {
		if it.kind != itemBlock && it.kind != itemHeader {
			continue
		}
		if it.kind == itemHeader && it.h.Torn > 0 {
			// It may have been summed with the unfinished tail as its end.
			h.Write(text[done : it.from-1])
			done = it.from - 1
			if hex.EncodeToString(h.Sum(nil)) == sum {
				return true
			}
		}
		h.Write(text[done:it.to])
		done = it.to
		if hex.EncodeToString(h.Sum(nil)) == sum {
			return true
		}
	}
	return false
}

// hashUnpacked is the hash of the text of a compressed segment.
func hashUnpacked(fs FS, name string) (string, error) {
	file, err := fs.Open(name)
	if err != nil {
		return "", err
	}
	defer file.Close()
	text, closeText, err := openText(file, &segFile{name: name, compressed: true, limit: -1})
	if err != nil {
		return "", err
	}
	defer closeText()
	h := sha256.New()
	_, err = io.Copy(h, text)
	return hex.EncodeToString(h.Sum(nil)), err
}
