package segment

// ClockState is what the machine's clocks showed at one instant.
type ClockState struct {
	// Boot is nanoseconds by the boot-time clock: never stepped, counts
	// through suspend, starts anew with each boot.
	Boot int64
	// Wall is nanoseconds since 1970 UTC by the wall clock at the same instant.
	Wall int64
	// Synced says that the wall clock has been synchronised since this boot.
	// It stays true once it was.
	Synced bool
	// Given says that the stamps were not taken from this machine's clock but
	// typed or imported: they are never re-timed and never quarantined.
	Given bool
}

// offset is what turns a boot-time instant into a wall-clock one.
func (c ClockState) offset() int64 { return c.Wall - c.Boot }
