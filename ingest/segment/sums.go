package segment

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"maps"
	"slices"
	"strings"
)

// SumsFile holds the SHA-256 of every closed file of a run folder, in the
// format of coreutils: sha256sum -c SHA256SUMS checks it.
const SumsFile = "SHA256SUMS"

// ReadSums reads SHA256SUMS: hexadecimal hashes by slash-separated name. A
// missing file is empty.
func ReadSums(fs FS) (map[string]string, error) {
	text, err := ReadFile(fs, SumsFile)
	if isNotExist(err) {
		return map[string]string{}, nil
	}
	if err != nil {
		return nil, err
	}
	sums := map[string]string{}
	n := 0
	for line := range strings.Lines(string(text)) {
		n++
		sum, name, ok := parseSum(strings.TrimRight(line, "\r\n"))
		if !ok {
			return nil, fmt.Errorf("%s:%d: not a line of sha256sum: %q", SumsFile, n, line)
		}
		sums[name] = sum
	}
	return sums, nil
}

// parseSum takes "HASH  NAME" and "HASH *NAME".
func parseSum(line string) (sum, name string, ok bool) {
	if len(line) < 67 || line[64] != ' ' || line[65] != ' ' && line[65] != '*' {
		return "", "", false
	}
	raw, err := hex.DecodeString(line[:64])
	if err != nil || len(raw) != sha256.Size {
		return "", "", false
	}
	return strings.ToLower(line[:64]), line[66:], true
}

// UpdateSums brings SHA256SUMS up to date: it takes the sums of the named
// files as they lie on disk, drops names whose files are gone, and replaces the
// file in one step, synced. Names with a newline or backslash are refused.
func UpdateSums(fs FS, names ...string) error {
	sums, err := ReadSums(fs)
	if err != nil {
		return err
	}
	for name := range sums {
		f, err := fs.Open(name)
		switch {
		case isNotExist(err):
			delete(sums, name)
		case err != nil:
			return err
		default:
			f.Close()
		}
	}
	for _, name := range names {
		if strings.ContainsAny(name, "\n\r\\") {
			return fmt.Errorf("%s cannot name %q", SumsFile, name)
		}
		if sums[name], err = hashFile(fs, name); err != nil {
			return fmt.Errorf("%s: %w", name, err)
		}
	}
	var b bytes.Buffer
	for _, name := range slices.Sorted(maps.Keys(sums)) {
		fmt.Fprintf(&b, "%s  %s\n", sums[name], name)
	}
	return ReplaceFile(fs, SumsFile, b.Bytes())
}

func hashFile(fs FS, name string) (string, error) {
	f, err := fs.Open(name)
	if err != nil {
		return "", err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return "", err
	}
	h := sha256.New()
	n, err := io.Copy(h, io.NewSectionReader(f, 0, info.Size()))
	if err == nil && n != info.Size() {
		err = io.ErrUnexpectedEOF
	}
	return hex.EncodeToString(h.Sum(nil)), err
}
