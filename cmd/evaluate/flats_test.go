package main

import (
	"os"
	"testing"
)

// dataDir returns the folder of real data, which is not part of this repository.
func dataDir(t *testing.T) string {
	t.Helper()
	dir := os.Getenv("LAPGATE_DATA")
	if dir == "" {
		t.Skip("LAPGATE_DATA is not set: want the folder with emva1288_ccd12 and line_flats")
	}
	return dir
}

func within(t *testing.T, from map[string]any, name string, low, high float64) {
	t.Helper()
	if v := numberOf(from[name]); !(v >= low && v <= high) {
		t.Errorf("%s: got %v, want %v to %v", name, from[name], low, high)
	}
}

// EMVA 1288 reference set 001. The published full set of 50 levels gives K 0.2801
// DN/e⁻ and QE 0.452; here are 14 levels.
func TestEMVAFrames(t *testing.T) {
	got, err := evaluateEMVA(dataDir(t))
	if err != nil {
		t.Fatal(err)
	}
	t.Log(got)
	within(t, got, "corrected_over_floor", 0.98, 1.02)
	within(t, got, "one_corrected_over_floor", 0.98, 1.02)
	within(t, got, "low_frequency_ratio", 5, 100)
	within(t, got, "gain_ramp_dn_per_e", 0.97*0.2801, 1.03*0.2801)
	within(t, got, "quantum_efficiency", 0.97*0.452, 1.03*0.452)
}

func TestLineFlats(t *testing.T) {
	got, err := evaluateLineFlats(dataDir(t))
	if err != nil {
		t.Fatal(err)
	}
	t.Log(got)
	within(t, got, "raw_spread_percent", 2, 4)
	within(t, got, "corrected_spread_percent", 0.1, 0.55)
}
