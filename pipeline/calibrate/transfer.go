package calibrate

import (
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate/emva"
)

// transferGroups is into how many groups of like brightness tiles are gathered.
const transferGroups = 40

// transferPoints returns mean and variance above dark of groups of tiles, in the order of
// their brightness: the photon-transfer plot of a single exposure.
func transferPoints(tiles []emva.Level, dark emva.Level) []emva.Level {
	sorted := slices.SortedFunc(slices.Values(tiles), func(a, b emva.Level) int {
		switch {
		case a.MeanDN < b.MeanDN:
			return -1
		case a.MeanDN > b.MeanDN:
			return 1
		}
		return 0
	})
	var out []emva.Level
	for k := range transferGroups {
		group := sorted[k*len(sorted)/transferGroups : (k+1)*len(sorted)/transferGroups]
		if len(group) == 0 {
			continue
		}
		var p emva.Level
		for _, l := range group {
			p.MeanDN += (l.MeanDN - dark.MeanDN) / float64(len(group))
			p.VarianceDN2 += (l.VarianceDN2 - dark.VarianceDN2) / float64(len(group))
		}
		out = append(out, p)
	}
	return out
}

// ramp takes K from a ramp in place of the response frames.
func (b *builder) ramp(in Inputs) error {
	if len(in.Ramp) == 0 {
		return nil
	}
	ramp, used, err := MeasureRamp(in.Ramp, func(f Frame) error {
		if f.SensorC != nil {
			b.temperature.note(*f.SensorC)
		}
		return b.sameButExposure(f)
	})
	if err != nil {
		return err
	}
	b.from.ResponseGain, b.from.Ramp = b.gain, &ramp
	b.from.Frames = append(b.from.Frames, used...)
	b.gain, b.from.GainLevels = ramp.Figures.GainDNPerE, ramp.Figures.Levels
	return nil
}

// same refuses a frame that was not taken as the dark frames were.
func (b *builder) same(f Frame) error {
	got := f.Capture
	got.Format, got.Width, got.Height = f.Raw.Format, f.Raw.Width, f.Raw.Height
	return pipeline.MatchCapture(b.cal.Capture, got)
}

// sameButExposure is same for frames that may be exposed longer or shorter.
func (b *builder) sameButExposure(f Frame) error {
	f.Capture.ExposureUS = b.cal.Capture.ExposureUS
	return b.same(f)
}
