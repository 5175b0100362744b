package pipeline

// MasterSpec is a kept unit whose truth is known, as a recipe names it: when it must be
// shown and what must then be found.
type MasterSpec struct {
	Unit   string
	Expect Verdict // Accept or Reject
	// What a master with a defect proves: that its view finds this kind, with Measure
	// within Low and High. Empty for one that must be accepted.
	View      string
	Kind      Kind
	Measure   string // one of MasterMeasures
	Low, High *float64

	EveryMinutes int   // due so long after it passed; 0 = no such rule
	DueAt        []int // minutes after local midnight at which it is due, such as starts of shifts
	GraceMinutes int   // how long after it is due by the clock the station may go on
}

// MasterMeasures lists what of a master's defect can be followed.
func MasterMeasures() []string {
	return []string{"diameter_um", "length_um", "width_um", "peak_sigma", "snr", "flux"}
}

// Measured returns the measure with this name; ok is false for a name not listed.
func (d Defect) Measured(name string) (value float64, ok bool) {
	switch name {
	case "diameter_um":
		return d.DiameterUM, true
	case "length_um":
		return d.LengthUM, true
	case "width_um":
		return d.WidthUM, true
	case "peak_sigma":
		return d.PeakSigma, true
	case "snr":
		return d.SNR, true
	case "flux":
		return d.Flux, true
	}
	return 0, false
}
