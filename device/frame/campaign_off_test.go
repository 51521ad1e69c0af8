//go:build !campaign

package frame_test

const (
	// slipDraws is how many damaged frames of each kind and fault are drawn.
	slipDraws = 20_000
	// usualMutations is how many damaged streams the mutation campaign feeds.
	usualMutations = 250_000
)
