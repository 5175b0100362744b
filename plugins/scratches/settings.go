package scratches

import (
	"fmt"

	"lapgate/pipeline/raster/lines"
)

// The polarities of scratches.
const (
	Bright = "bright"
	Dark   = "dark"
	Both   = "both"
)

// The resolutions of the search.
const (
	Full = "full"
	Half = "half"
)

// Settings of the stage.
type Settings struct {
	// Polarity says which scratches are looked for: bright (brighter than their
	// surroundings), dark, or both.
	Polarity string `json:"polarity" yaml:"polarity"`
	// Resolution is full, or half: means of 2 × 2 pixels, in about a third of the time. A
	// scratch of one pixel must then be a third stronger to be found as surely.
	Resolution string `json:"resolution" yaml:"resolution"`
	// SeedSigma is how many sigmas the sum along a line through a strip of 128 px must
	// reach to be looked at; at least 3.5. Lower finds more and takes longer.
	SeedSigma float64 `json:"seed_sigma" yaml:"seed_sigma"`
	// LineSigma is how many sigmas the sum along a whole line must reach; at least
	// seed_sigma. A line shorter than 150 px must reach half a sigma more for every halving.
	LineSigma float64 `json:"line_sigma" yaml:"line_sigma"`
	// MinLengthPx is the shortest line, in px, that makes a defect; at least 16.
	MinLengthPx float64 `json:"min_length_px" yaml:"min_length_px"`
	// JoinGapPx is over how many px a scratch may be broken. 0: none.
	JoinGapPx float64 `json:"join_gap_px" yaml:"join_gap_px"`
	// RimPx is how near the region's border, in px, a line along it is taken for the light
	// of the rim. 0: such lines are reported, too.
	RimPx float64 `json:"rim_px" yaml:"rim_px"`
}

// Default leaves about one line in noise alone in 20 frames of 12 million pixels.
var Default = Settings{Polarity: Bright, Resolution: Full, SeedSigma: lines.Default.Seed, LineSigma: lines.Default.Threshold,
	MinLengthPx: lines.Default.MinLength, JoinGapPx: lines.Default.JoinGap, RimPx: lines.Default.Rim}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	switch {
	case s.Polarity != Bright && s.Polarity != Dark && s.Polarity != Both:
		return fmt.Errorf("polarity: got %q, want bright, dark or both", s.Polarity)
	case s.Resolution != Full && s.Resolution != Half:
		return fmt.Errorf("resolution: got %q, want full or half", s.Resolution)
	case !(s.SeedSigma >= 3.5 && s.SeedSigma <= 100):
		return fmt.Errorf("seed_sigma: got %g, want 3.5 to 100", s.SeedSigma)
	case !(s.LineSigma >= s.SeedSigma && s.LineSigma <= 1000):
		return fmt.Errorf("line_sigma: got %g, want seed_sigma (%g) to 1000", s.LineSigma, s.SeedSigma)
	case !(s.MinLengthPx >= 16 && s.MinLengthPx <= 1e5):
		return fmt.Errorf("min_length_px: got %g, want 16 to 100000", s.MinLengthPx)
	case !(s.JoinGapPx >= 0 && s.JoinGapPx <= 1000):
		return fmt.Errorf("join_gap_px: got %g, want 0 to 1000", s.JoinGapPx)
	case !(s.RimPx >= 0 && s.RimPx <= 1000):
		return fmt.Errorf("rim_px: got %g, want 0 to 1000", s.RimPx)
	}
	return nil
}

var polarities = map[string]lines.Polarity{Bright: lines.Bright, Dark: lines.Dark, Both: lines.Both}

func (s Settings) lines() lines.Settings {
	l := lines.Default
	l.Polarity, l.Half = polarities[s.Polarity], s.Resolution == Half
	l.Seed, l.Threshold, l.MinLength, l.JoinGap, l.Rim = s.SeedSigma, s.LineSigma, s.MinLengthPx, s.JoinGapPx, s.RimPx
	return l
}
