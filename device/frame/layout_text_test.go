package frame_test

import (
	"strings"
	"testing"

	"gaugelog/device/frame"
)

func TestDescriptionsRefused(t *testing.T) {
	tests := []struct {
		o    frame.Options
		want string
	}{
		{frame.Options{Pattern: `(?P<value>\d)`, Unit: frame.Millimetre}, "needs an end"},
		{frame.Options{Pattern: `\d`, End: []byte("\r"), Unit: frame.Millimetre}, "no group value"},
		{frame.Options{Pattern: `(?P<value>\d*)`, End: []byte("\r"), Unit: frame.Millimetre}, "empty"},
		{frame.Options{Pattern: `(?P<value>\d)`, End: []byte("\r")}, "no unit"},
		{frame.Options{Pattern: `(?P<value>\d`, End: []byte("\r"), Unit: frame.Millimetre}, "missing closing )"},
		{frame.Options{Pattern: `(?P<value>\d)`, End: []byte("\r"), Unit: frame.Millimetre, Checksum: frame.Checksum{Kind: "sum8"}}, "group sum"},
		{frame.Options{Pattern: `(?P<value>\d)(?P<sum>..)`, End: []byte("\r"), Unit: frame.Millimetre}, "no checksum says"},
		{frame.Options{Pattern: `(?P<value>\d)`, End: []byte("\r"), Unit: frame.Millimetre, Checksum: frame.Checksum{Kind: "md5"}}, "unknown checksum"},
		{frame.Options{Pattern: `(?P<value>\d)`, End: []byte("\r"), Unit: frame.Millimetre, Longest: 1 << 20}, "longest frame"},
	}
	for _, tt := range tests {
		tt.o.Kind = frame.Text
		if _, err := frame.New(tt.o); err == nil || !strings.Contains(err.Error(), tt.want) {
			t.Errorf("%+v: %v, want %q", tt.o, err, tt.want)
		}
	}
}
