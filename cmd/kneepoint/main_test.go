package main

import (
	"os"
	"testing"
)

// TestMain keeps commands under test from calibrating every product they are given,
// which takes most of a minute each, and from the user's cache; tests of calibration ask
// for it.
func TestMain(m *testing.M) {
	os.Setenv("KNEEPOINT_CALIBRATE", calibrateOff)
	os.Setenv("KNEEPOINT_CACHE", "off")
	os.Exit(m.Run())
}
