package live

import (
	"testing"

	"go.uber.org/goleak"
)

// Every server, stream and desk of these tests must end with its test.
func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }
