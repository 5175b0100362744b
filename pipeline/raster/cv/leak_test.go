//go:build gocv_specific_modules && matprofile

package cv

import (
	"testing"

	"gocv.io/x/gocv"
)

// Run with -tags=gocv_specific_modules,matprofile: every Mat is closed.
func TestNoMatIsLost(t *testing.T) {
	before := gocv.MatProfile.Count()
	raw, dark, gain := scene()
	chain, err := NewTunedChain(dark, gain, nil, 3.5, 6)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := chain.Run(raw); err != nil {
		t.Fatal(err)
	}
	chain.Close()
	if n := gocv.MatProfile.Count(); n != before {
		t.Errorf("%d Mats are open, %d were before", n, before)
	}
}
