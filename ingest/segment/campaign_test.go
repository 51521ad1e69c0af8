//go:build campaign

package segment_test

// campaign runs the long forms: go test -tags campaign ./ingest/segment
const campaign = true
