package segment

import (
	"math/bits"
	"time"
)

// Limits of the re-timing and quarantine rules of FORMAT.md, in ns.
const (
	slewLimit    = int64(time.Second)      // a greater change of (wall - boot) is a step
	earlySlack   = 10 * int64(time.Second) // a line may be older than the checkpoint before it
	lateSlack    = int64(time.Second)
	aheadLimit   = 24 * int64(time.Hour)          // of a line before its checkpoint's wall clock
	absurdBefore = int64(1577836800) * int64(1e9) // 2020-01-01
	absurdAfter  = int64(4102444800) * int64(1e9) // 2100-01-01
)

// bootFix is where one boot's clock was first seen synchronised.
type bootFix struct {
	boot, offset int64
}

// clockFixes collects, by boot id, the earliest synchronised clock state.
type clockFixes map[string]bootFix

func (f clockFixes) see(boot string, c ClockState) {
	if !c.Synced || c.Given || boot == "" {
		return
	}
	if old, ok := f[boot]; !ok || c.Boot < old.boot {
		f[boot] = bootFix{c.Boot, c.offset()}
	}
}

// blockClock is what is needed to tell the instants of one block's lines.
type blockClock struct {
	now  ClockState
	prev *ClockState // of the comment before, same boot; nil where damaged
	fix  bootFix
	// fixed says that fix is known.
	fixed bool
}

// verdict is what became of a stamp.
type verdict uint8

const (
	asWritten verdict = iota
	retimed
	unset // taken before the clock was set, and it never was in that boot
)

// plainBlock tells whether no stamp of the block can need re-timing.
func (b *blockClock) plainBlock() bool {
	if b.now.Given {
		return true
	}
	return b.now.Synced && (b.prev == nil || b.prev.Synced || b.prev.Given || within(b.now.offset()-b.prev.offset(), slewLimit))
}

func within(d, limit int64) bool { return d <= limit && d >= -limit }

// instant applies the re-timing rule to one stamp.
func (b *blockClock) instant(t int64) (int64, verdict) {
	if b.plainBlock() {
		return t, asWritten
	}
	offset := b.now.offset()
	old := false
	if b.prev != nil {
		before := b.prev.offset()
		if d := offset - before; within(d, slewLimit) {
			offset = before + share(d, t-b.prev.Wall, b.now.Wall-b.prev.Wall)
		} else if !b.fits(t-offset) && b.fits(t-before) {
			offset, old = before, true
		}
	}
	if b.now.Synced && !old {
		return t, asWritten
	}
	if !b.fixed {
		return t, unset
	}
	return t - offset + b.fix.offset, retimed
}

// fits tells whether a boot-time instant lies in the block.
func (b *blockClock) fits(boot int64) bool {
	return boot >= b.prev.Boot-earlySlack && boot <= b.now.Boot+lateSlack
}

// share is d * num / den rounded toward zero, num held within 0 and den; whole
// numbers, so that it is the same on every machine.
func share(d, num, den int64) int64 {
	if num <= 0 || den <= 0 {
		return 0
	}
	if num >= den {
		return d
	}
	abs := d
	if d < 0 {
		abs = -d
	}
	hi, lo := bits.Mul64(uint64(abs), uint64(num))
	q, _ := bits.Div64(hi, lo, uint64(den))
	if d < 0 {
		return -int64(q)
	}
	return int64(q)
}

// absurd tells whether a re-timed instant is to be quarantined.
func (b *blockClock) absurd(t int64, v verdict) bool {
	if b.now.Given {
		return false
	}
	if t < absurdBefore || t > absurdAfter {
		return true
	}
	return v == asWritten && t-b.now.Wall > aheadLimit
}
