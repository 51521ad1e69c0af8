// Package onlook looks at a run folder that another process records into, or
// that is finished, and keeps a desk of it: for the terminal view, which has
// nothing but the folder.
//
// It promises to change nothing in the folder and to hold nobody up: it reads
// with its own file handles, takes the recorder's lock for an instant only where
// nothing has been written for half a minute, and knows only what is on disk, so
// that its readings are as old as the last sync. While nothing is written, a look
// costs three questions for a file's size a second; what is written is read once.
// Memory does not grow with the run.
package onlook
