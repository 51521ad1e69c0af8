//go:build campaign

package frame_test

// slipDraws is how many damaged frames of each kind and fault are drawn:
//
//	go test -tags campaign -run TestShareThatSlipsThroughSum8 -v ./device/frame
const slipDraws = 2_000_000
