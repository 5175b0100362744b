package lines

import (
	"fmt"
	"math"

	"lapgate/pipeline/raster"
)

// Polarity says which lines are looked for.
type Polarity int

// The polarities.
const (
	Dark   Polarity = -1 // darker than their surroundings
	Both   Polarity = 0
	Bright Polarity = 1
)

// Settings say what to look for.
type Settings struct {
	Polarity  Polarity
	Half      bool    // search in means of 2 × 2 pixels: about a quarter of the work
	Seed      float64 // sigmas that the sum through one strip must reach to be looked at; with Half 0.2 more
	Threshold float64 // sigmas that the refined line must reach
	MinLength float64 // px of the picture
	JoinGap   float64 // px of the picture over which a line may be broken
	Rim       float64 // px from the region's border within which a line along it does not count
	MaxLines  int     // keep only the strongest
	// Centre is that of the part, px: lay may be concentric about it. Nil = unknown.
	Centre *raster.Point
}

// Default finds a line of 300 × 1 px in white noise at three quarters of a sigma.
var Default = Settings{Polarity: Bright, Seed: 4, Threshold: 6.9, MinLength: 40, JoinGap: 40, Rim: 6, MaxLines: 2000}

// Check says what is wrong with the settings.
func (s Settings) Check() error {
	switch {
	case s.Polarity < Dark || s.Polarity > Bright:
		return fmt.Errorf("polarity: got %d, want −1, 0 or 1", s.Polarity)
	case !(s.Seed >= 3.5 && s.Seed <= 100):
		return fmt.Errorf("seed: got %g sigmas, want 3.5 to 100", s.Seed)
	case !(s.Threshold >= s.Seed && s.Threshold <= 1000):
		return fmt.Errorf("threshold: got %g sigmas, want seed (%g) to 1000", s.Threshold, s.Seed)
	case !(s.MinLength >= 16 && s.MinLength <= 1e5):
		return fmt.Errorf("min_length: got %g px, want 16 to 100000", s.MinLength)
	case !(s.JoinGap >= 0 && s.JoinGap <= 1000):
		return fmt.Errorf("join_gap: got %g px, want 0 to 1000", s.JoinGap)
	case !(s.Rim >= 0 && s.Rim <= 1000):
		return fmt.Errorf("rim: got %g px, want 0 to 1000", s.Rim)
	case s.MaxLines < 1:
		return fmt.Errorf("max_lines: got %d, want 1 or more", s.MaxLines)
	}
	return nil
}

// need returns the sigmas that a line of some length (px of the picture) must reach: more
// for a short one, since noise makes as many lines of every octave of length, while what a
// short scratch lacks in length, it must have in height to be seen at all.
func (s Settings) need(length float64) float64 {
	return s.Threshold + 0.5*max(0, math.Log2(150/length))
}

// halfSeed is how many sigmas more a seed needs in half resolution, where a strip holds
// twice as much of a scratch.
const halfSeed = 0.2

// inPixels returns the settings with lengths in pixels of the picture searched.
func (s Settings) inPixels() Settings {
	if s.Half {
		s.Seed += halfSeed
		s.MinLength, s.JoinGap, s.Rim = s.MinLength/2, s.JoinGap/2, math.Ceil(s.Rim/2)
		if s.Centre != nil {
			s.Centre = &raster.Point{X: (s.Centre.X - 0.5) / 2, Y: (s.Centre.Y - 0.5) / 2}
		}
	}
	return s
}
