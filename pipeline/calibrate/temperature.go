package calibrate

import (
	"iter"

	"lapgate/pipeline"
)

// thermometer notes what frames say of the camera's temperature as they pass.
type thermometer struct {
	sum, low, high float64
	n              int
}

// watch passes frames on; a nil sequence stays nil.
func (t *thermometer) watch(frames iter.Seq2[Frame, error]) iter.Seq2[Frame, error] {
	if frames == nil {
		return nil
	}
	return func(yield func(Frame, error) bool) {
		for f, err := range frames {
			if err == nil && f.SensorC != nil {
				t.note(*f.SensorC)
			}
			if !yield(f, err) {
				return
			}
		}
	}
}

func (t *thermometer) note(c float64) {
	if t.n == 0 {
		t.low, t.high = c, c
	}
	t.sum, t.low, t.high = t.sum+c, min(t.low, c), max(t.high, c)
	t.n++
}

// seen returns nil when no frame said anything.
func (t *thermometer) seen() *pipeline.SensorTemperature {
	if t.n == 0 {
		return nil
	}
	return &pipeline.SensorTemperature{MeanC: t.sum / float64(t.n), LowC: t.low, HighC: t.high, Frames: t.n}
}
