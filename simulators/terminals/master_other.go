//go:build !unix

package terminals

import "os"

// waitable returns f as it is: there are no pseudo-terminals here.
func waitable(f *os.File) (*os.File, error) { return f, nil }
