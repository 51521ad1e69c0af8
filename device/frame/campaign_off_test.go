//go:build !campaign

package frame_test

// slipDraws is how many damaged frames of each kind and fault are drawn.
const slipDraws = 20_000
