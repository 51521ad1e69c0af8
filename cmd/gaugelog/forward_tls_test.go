package main

import (
	"bytes"
	"context"
	"encoding/pem"
	"io"
	"log"
	"net/http"
	"net/http/httptest"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync/atomic"
	"testing"
	"time"
)

// TestForwardOverTLS sends a run to a server whose certificate the machine
// trusts; one whose it does not trust gets not a byte, and it is said why.
func TestForwardOverTLS(t *testing.T) {
	var bodies atomic.Int64
	server := httptest.NewUnstartedServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		n, err := io.Copy(io.Discard, r.Body)
		if err != nil || r.TLS == nil || n == 0 {
			t.Errorf("%d bytes, %v, TLS %v", n, err, r.TLS != nil)
		}
		bodies.Add(1)
		w.WriteHeader(http.StatusNoContent)
	}))
	server.Config.ErrorLog = log.New(io.Discard, "", 0) // a refused handshake is expected
	server.StartTLS()
	defer server.Close()
	// The command as its own process: a process reads the trusted certificates once.
	program, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	named := filepath.Join(dir, "gaugelog")
	if err := os.Symlink(program, named); err != nil {
		t.Skip("no links here: ", err)
	}
	trusted := filepath.Join(dir, "trusted.pem")
	if err := os.WriteFile(trusted, pem.EncodeToMemory(&pem.Block{Type: "CERTIFICATE", Bytes: server.Certificate().Raw}), 0o644); err != nil {
		t.Fatal(err)
	}
	run := foreignRun(t, dir, "board", 800, 10)
	forward := func(ctx context.Context, certificates string) (string, error) {
		var errOut bytes.Buffer
		c := exec.CommandContext(ctx, named, "forward", run, "--to", server.URL+"/write?db=lab")
		c.Env, c.Stderr = append(os.Environ(), "SSL_CERT_FILE="+certificates, "SSL_CERT_DIR="+t.TempDir()), &errOut
		err := c.Run()
		return errOut.String(), err
	}
	// It goes on trying, as with any server that is not to be reached.
	brief, stop := context.WithTimeout(t.Context(), 2*time.Second)
	defer stop()
	if said, err := forward(brief, filepath.Join(dir, "none.pem")); err == nil || bodies.Load() != 0 || !strings.Contains(said, "certificate") {
		t.Errorf("to a server nobody vouches for: %v, %d bodies, said %q", err, bodies.Load(), said)
	}
	if said, err := forward(t.Context(), trusted); err != nil || bodies.Load() == 0 {
		t.Errorf("to a server that is trusted: %v, %d bodies, said %q", err, bodies.Load(), said)
	}
}
