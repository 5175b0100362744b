package calibrate

// Rules are the thresholds of a calibration. Where no standard is named they are
// common practice.
type Rules struct {
	MinFrames        int     // of each kind; at least 2, for the noise needs a pair
	MaxFrames        int     // of each kind
	SaturatedShare   float64 // pixels at full scale that a frame may have; such pixels are bad
	ClippedShare     float64 // dark pixels at 0 that a frame may have (EMVA 1288: 0.5 %; value from memory)
	MinResponseShare float64 // mean response above dark, of full scale
	UnsteadyShare    float64 // change of a frame's mean against the first, of the mean above dark
	HotSigma         float64 // dark above the local median, in robust sigmas
	DeviatingSigma   float64 // response off the local median, in robust sigmas,
	DeviatingShare   float64 // and at least this share of the local median
	DeadShare        float64 // response below this share of the mean is dead
	NoisySigma       float64 // temporal noise of a dark pixel, in typical sigmas; needs NoisyFrames
	NoisyFrames      int     // dark frames from which noisy pixels are told
	MaxBadShare      float64 // bad pixels of all
	LinearShare      float64 // of full scale, up to which K is fitted (EMVA 1288: 70 %)
}

// DefaultRules returns the rules in force where none are stated.
func DefaultRules() Rules {
	return Rules{
		MinFrames:        2,
		MaxFrames:        1000,
		SaturatedShare:   1e-4,
		ClippedShare:     0.005,
		MinResponseShare: 0.1,
		UnsteadyShare:    0.02,
		HotSigma:         8,
		DeviatingSigma:   8,
		DeviatingShare:   0.1,
		DeadShare:        0.05,
		NoisySigma:       5,
		NoisyFrames:      4,
		MaxBadShare:      0.01,
		LinearShare:      0.7,
	}
}
