package segment

import (
	"io"
	"io/fs"
)

// File is the seam to one open file. Tests swap in files that fail, tear and
// forget.
type File interface {
	io.Writer
	io.ReaderAt
	io.Closer
	// Sync makes written bytes durable (fdatasync).
	Sync() error
	Stat() (fs.FileInfo, error)
}

// FS is the seam to the file system under one run folder. Names are
// slash-separated and relative to it.
type FS interface {
	// Create makes a new file for appending; it fails if the name exists.
	Create(name string) (File, error)
	// Append opens a file for appending, making it if need be.
	Append(name string) (File, error)
	Open(name string) (File, error)
	Rename(from, to string) error
	Remove(name string) error
	ReadDir(dir string) ([]fs.DirEntry, error)
	MkdirAll(dir string) error
	// SyncDir makes creations, renames and removals in dir durable.
	SyncDir(dir string) error
}
