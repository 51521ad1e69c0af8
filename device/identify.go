package device

import (
	"fmt"
	"strings"

	"gaugelog/config"
	"gaugelog/device/frame"
)

// identityCheck asks a SCPI instrument who it is, once after each opening of
// its port, before any of its readings counts.
type identityCheck struct {
	request []byte
	decoder frame.Decoder
	emit    func(*frame.Frame)
	known   bool
}

// identityCheckOf returns the check that a frame asks for, nil for none.
func identityCheckOf(f config.Frame) (*identityCheck, error) {
	if f.SCPI == nil || f.SCPI.Identity == "" {
		return nil, nil
	}
	end, err := unescape(f.End)
	if err != nil {
		return nil, fmt.Errorf("end: %w", err)
	}
	d, err := frame.NewIdentity(f.SCPI.Identity, end)
	if err != nil {
		return nil, err
	}
	request, err := terminated([]byte("*IDN?"), f.End)
	return &identityCheck{request: request, decoder: d}, err
}

// unidentified reports that the instrument has still to say who it is.
func (s *slot) unidentified() bool { return s.identity != nil && !s.identity.known }

func (s *slot) feed(b []byte) {
	if s.unidentified() {
		s.identity.decoder.Feed(b, s.identity.emit)
		return
	}
	s.decoder.Feed(b, s.emit)
}

func (s *slot) reset(offset int64) {
	s.decoder.Reset(offset)
	if s.identity != nil {
		s.identity.decoder.Reset(offset)
	}
}

// identify deals with the answer to *IDN?: the right one lets the question
// that waits be asked, any other is refused, so that an instrument plugged
// into the wrong port is never read.
func (p *pump) identify(s *slot, f *frame.Frame) {
	at := p.at(f.Offset)
	switch {
	case !p.poll.expects(s.asked):
		p.refuse(s, f, at, "an answer nobody waited for")
	case f.Rejected != frame.None:
		p.refuse(s, f, at, "another instrument answers: its identity does not match")
	default:
		s.identity.known = true
		p.poll.again()
	}
}

// again asks the open question anew, at the next tick.
func (l *poll) again() { l.state, l.until = pollPausing, l.began }

// toldApart reports whether an answer of the one instrument can never be
// taken for one of the other: bus addresses or channels are in the answers.
func toldApart(a, b *instrument) bool {
	if a == b {
		return false
	}
	if a.spec.Kind == string(frame.ModbusReply) && b.spec.Kind == a.spec.Kind {
		return a.request[0] != b.request[0]
	}
	return a.carriesChannel() && b.carriesChannel() && a.channel != b.channel
}

func (in *instrument) carriesChannel() bool {
	return in.channel != "" && in.spec.Kind == string(frame.Text) && strings.Contains(in.spec.Pattern, "<channel>")
}
