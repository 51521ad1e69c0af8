//go:build campaign

package frame_test

const (
	// slipDraws is how many damaged frames of each kind and fault are drawn:
	//
	//	go test -tags campaign -run TestShareThatSlipsThroughSum8 -v ./device/frame
	slipDraws = 2_000_000
	// usualMutations is how many damaged streams the mutation campaign feeds.
	usualMutations = 100_000_000
)
