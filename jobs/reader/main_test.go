package reader

import (
	"testing"

	"go.uber.org/goleak"
)

// TestMain holds every test of the package to leaving no goroutine behind.
func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }
