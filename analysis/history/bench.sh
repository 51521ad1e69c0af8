#!/bin/sh
# Prints how fast a run folder is read back, beside line-protocol/v2's decoder on
# the same bytes in the same minutes, and in how much memory. Each line is a
# process of its own with GOMEMLIMIT set. Needs Linux, and for the comparison of
# memory some 6 GB in the folder for temporary files (TMPDIR).
#
#   analysis/history/bench.sh [readings] [readings of the larger run, 0 for none] [rounds]
set -eu
cd "$(dirname "$0")/../.."
exec go test -tags campaign -count 1 -timeout 2h -run '^TestMeasure$' ./analysis/history/historytest \
	-v -small "${1:-5000000}" -large "${2:-100000000}" -repeat "${3:-5}"
