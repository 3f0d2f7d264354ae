package api

import (
	"testing"

	"epitally/db/dbtest"
)

func TestMain(m *testing.M) { dbtest.Main(m) }
