package alarm

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"os/exec"
	"strings"
	"time"
)

// Command tells by running a program with the message as JSON on its standard
// input. No shell is involved.
type Command struct {
	// Program and Args are what is run.
	Program string
	Args    []string
	// Within bounds its time; 0: one minute.
	Within time.Duration
}

// mostSaid bounds what is kept of a failed command's words, in bytes.
const mostSaid = 400

// Name is the program.
func (c *Command) Name() string { return "command " + c.Program }

// Tell runs the program once and waits for it; an exit code other than 0 is an
// error with the last of what it said.
func (c *Command) Tell(ctx context.Context, m Message) error {
	within := c.Within
	if within == 0 {
		within = time.Minute
	}
	ctx, stop := context.WithTimeout(ctx, within)
	defer stop()
	body, err := json.Marshal(m)
	if err != nil {
		return err
	}
	cmd := exec.CommandContext(ctx, c.Program, c.Args...)
	cmd.Stdin = bytes.NewReader(append(body, '\n'))
	said := &tail{}
	cmd.Stdout, cmd.Stderr = said, said
	cmd.WaitDelay = 5 * time.Second
	if err := cmd.Run(); err != nil {
		return fmt.Errorf("%s: %w: %s", c.Program, err, strings.ToValidUTF8(string(said.last), "?"))
	}
	return nil
}

// tail keeps the last bytes written to it.
type tail struct{ last []byte }

func (t *tail) Write(p []byte) (int, error) {
	t.last = append(t.last, p...)
	if n := len(t.last); n > mostSaid {
		t.last = append(t.last[:0], t.last[n-mostSaid:]...)
	}
	return len(p), nil
}
