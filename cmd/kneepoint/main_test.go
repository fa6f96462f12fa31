package main

import (
	"os"
	"testing"
)

// TestMain keeps commands under test from calibrating every product they are given,
// which takes most of a minute each; tests of calibration ask for it.
func TestMain(m *testing.M) {
	os.Setenv("KNEEPOINT_CALIBRATE", calibrateOff)
	os.Exit(m.Run())
}
