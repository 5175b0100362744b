package fused

import (
	"fmt"

	"lapgate/pipeline/raster"
)

// Polarity says which blobs are looked for.
type Polarity int

// The polarities.
const (
	Dark   Polarity = -1 // darker than their surroundings
	Both   Polarity = 0
	Bright Polarity = 1
)

// Settings say what to look for.
type Settings struct {
	Low, High float64 // thresholds of the snr plane, sigmas; 1 <= Low <= High
	Polarity  Polarity
	MinAreaPx int // smallest blob, pixels above Low
	MaxBlobs  int // keep only the strongest; 0 = all
	Grid      raster.GridSettings
	SNR       bool // also write the snr plane
	Bands     int  // bands of rows that are worked on at once; below 2: one
}

// Check says what is wrong with the settings.
func (s Settings) Check() error {
	g := s.Grid
	switch {
	case !(s.Low >= 1 && s.Low <= s.High && s.High <= 1e6):
		return fmt.Errorf("thresholds: got %g and %g, want 1 <= low <= high <= 1000000", s.Low, s.High)
	case s.Polarity < Dark || s.Polarity > Bright:
		return fmt.Errorf("polarity: got %d, want −1, 0 or 1", s.Polarity)
	case s.MinAreaPx < 0 || s.MaxBlobs < 0:
		return fmt.Errorf("limits on blobs: got %d px and %d blobs, want 0 or more", s.MinAreaPx, s.MaxBlobs)
	case g.CellPx < 16 || g.CellPx > 1024 || g.CellPx%4 != 0:
		return fmt.Errorf("grid cell: got %d px, want 16 to 1024 in steps of 4", g.CellPx)
	case !(g.ClipSigma >= 2 && g.ClipSigma <= 5):
		return fmt.Errorf("grid clip: got %g sigmas, want 2 to 5", g.ClipSigma)
	case !(g.MinShare > 0 && g.MinShare <= 1 && g.FloorDN > 0 && g.FloorDN <= 1e4):
		return fmt.Errorf("grid: got share %g and floor %g DN, want 0 to 1 and 0 to 10000, both above 0", g.MinShare, g.FloorDN)
	}
	return nil
}
