package forward

import (
	"errors"
	"fmt"
	"os"
)

// setAside appends a line that the server refuses, with its words as a comment,
// to the file beside the cursor; it is on disk when this returns.
func (f *Forwarder) setAside(line []byte, words string) error {
	file, err := f.state.OpenFile(f.name+".refused.lp", os.O_WRONLY|os.O_CREATE|os.O_APPEND, 0o664)
	if err != nil {
		return fmt.Errorf("setting a refused line aside: %w", err)
	}
	_, err = file.Write(append(fmt.Appendf(nil, "# %s\n", words), line...))
	if err = errors.Join(err, file.Sync(), file.Close(), syncDir(f.state, ".")); err != nil {
		return fmt.Errorf("setting a refused line aside: %w", err)
	}
	f.count.Refused++
	f.tell(Notice{Refused: string(line[:len(line)-1]), Words: words})
	return nil
}
