package edge

import "fmt"

// Settings of the stage.
type Settings struct {
	// Polarity says how the part looks against its surroundings: dark, as a silhouette, or
	// bright.
	Polarity string `json:"polarity" yaml:"polarity"`
	// MinReachUM is the reach from which something is a chip, in µm. 0: one pixel.
	MinReachUM float64 `json:"min_reach_um" yaml:"min_reach_um"`
	// MaxReachUM is how far in the outline is followed, in µm; a chip that goes further has
	// this reach. 0: a tenth of the radius.
	MaxReachUM float64 `json:"max_reach_um" yaml:"max_reach_um"`
	// GapUM joins two pieces that lie no further apart along the edge, in µm. 0: three pixels.
	GapUM float64 `json:"gap_um" yaml:"gap_um"`
	// NotchReachUM and NotchLengthUM are those of a notch that belongs there: the run that
	// comes closest, within a quarter of both, is no chip; of a longer one as deep, which a
	// chip beside the notch makes, the notch's length is taken out. 0: there is no notch.
	NotchReachUM  float64 `json:"notch_reach_um" yaml:"notch_reach_um"`
	NotchLengthUM float64 `json:"notch_length_um" yaml:"notch_length_um"`
}

// Default is a silhouette without a notch.
var Default = Settings{Polarity: "dark"}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	if s.Polarity != "dark" && s.Polarity != "bright" {
		return fmt.Errorf("polarity: got %q, want dark or bright", s.Polarity)
	}
	for _, n := range []struct {
		key string
		v   float64
	}{{"min_reach_um", s.MinReachUM}, {"max_reach_um", s.MaxReachUM}, {"gap_um", s.GapUM}, {"notch_reach_um", s.NotchReachUM}, {"notch_length_um", s.NotchLengthUM}} {
		if !(n.v >= 0 && n.v <= 1e7) {
			return fmt.Errorf("%s: got %g, want 0 to 1e7", n.key, n.v)
		}
	}
	switch {
	case s.MaxReachUM > 0 && s.MaxReachUM <= s.MinReachUM:
		return fmt.Errorf("max_reach_um: got %g, want more than min_reach_um (%g)", s.MaxReachUM, s.MinReachUM)
	case (s.NotchReachUM > 0) != (s.NotchLengthUM > 0):
		return fmt.Errorf("notch_length_um: got %g with notch_reach_um %g, want both or none", s.NotchLengthUM, s.NotchReachUM)
	}
	return nil
}
