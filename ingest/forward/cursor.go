package forward

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"hash/crc32"
	"io/fs"
	"os"
	"path"
)

// cursor says how far a run was taken by one server.
type cursor struct {
	Format int    `json:"format"`
	Run    string `json:"run"`
	// Offsets is how far each file was taken, by its name.
	Offsets map[string]int64 `json:"offsets"`
	// Held are stretches passed over because their clock was never set.
	Held []stretch `json:"held,omitempty"`
}

// stretch is a part of one file's text.
type stretch struct {
	File string `json:"file"`
	From int64  `json:"from"`
	To   int64  `json:"to"`
}

// hold notes a stretch passed over, joined to the one before where they touch.
func (c *cursor) hold(s stretch) {
	if n := len(c.Held); n > 0 && c.Held[n-1].File == s.File && c.Held[n-1].To == s.From {
		c.Held[n-1].To = s.To
		return
	}
	c.Held = append(c.Held, s)
}

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

// encode writes the cursor as one line of JSON and one of its CRC-32C.
func (c *cursor) encode() []byte {
	b, err := json.Marshal(c)
	if err != nil {
		panic(err) // strings and whole numbers
	}
	b = append(b, '\n')
	return fmt.Appendf(b, "crc32c %08x\n", crc32.Checksum(b, castagnoli))
}

func decodeCursor(b []byte) (*cursor, error) {
	text, check, ok := bytes.Cut(b, []byte{'\n'})
	if !ok || string(check) != fmt.Sprintf("crc32c %08x\n", crc32.Checksum(b[:len(text)+1], castagnoli)) {
		return nil, errors.New("the cursor is torn or was changed")
	}
	c := new(cursor)
	if err := json.Unmarshal(text, c); err != nil {
		return nil, err
	}
	if c.Format != 1 {
		return nil, fmt.Errorf("the cursor has format %d, 1 is known", c.Format)
	}
	return c, nil
}

// loadCursor reads the cursor, or the copy before it, or begins anew: what is
// lost is sent again.
func loadCursor(root *os.Root, name, run string) (c *cursor, again string, err error) {
	for _, n := range []string{name, name + ".before"} {
		b, err := root.ReadFile(n)
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			return nil, "", err
		}
		c, err := decodeCursor(b)
		if err == nil && c.Run == run {
			return c, again, nil
		}
		if err == nil {
			err = fmt.Errorf("the cursor is of run %s, this is %s", c.Run, run)
		}
		again = fmt.Sprintf("%s: %v: what was sent since is sent again", n, err)
	}
	return &cursor{Format: 1, Run: run, Offsets: map[string]int64{}}, again, nil
}

// save puts the cursor on disk in one step, and keeps the copy before.
func (c *cursor) save(root *os.Root, name string) error {
	tmp := name + ".partial"
	f, err := root.OpenFile(tmp, os.O_WRONLY|os.O_CREATE|os.O_TRUNC, 0o664)
	if err != nil {
		return err
	}
	_, err = f.Write(c.encode())
	if err = errors.Join(err, f.Sync(), f.Close()); err != nil {
		return fmt.Errorf("saving the cursor: %w", err)
	}
	if err := root.Rename(name, name+".before"); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("saving the cursor: %w", err)
	}
	if err := root.Rename(tmp, name); err != nil {
		return fmt.Errorf("saving the cursor: %w", err)
	}
	return syncDir(root, path.Dir(name))
}
