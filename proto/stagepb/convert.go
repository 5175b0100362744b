package stagepb

import (
	"fmt"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// each converts a list; an empty list becomes nil, so that a round trip gives equal items.
func each[A, B any](list []A, convert func(A) B) []B {
	if len(list) == 0 {
		return nil
	}
	out := make([]B, len(list))
	for i, a := range list {
		out[i] = convert(a)
	}
	return out
}

// FromMeasurements encodes a list.
func FromMeasurements(list []pipeline.Measurement) []*Measurement {
	return each(list, func(m pipeline.Measurement) *Measurement {
		return &Measurement{Name: m.Name, Value: m.Value, Unit: m.Unit}
	})
}

// ToMeasurements decodes a list.
func ToMeasurements(list []*Measurement) []pipeline.Measurement {
	return each(list, func(m *Measurement) pipeline.Measurement {
		return pipeline.Measurement{Name: m.GetName(), Value: m.GetValue(), Unit: m.GetUnit()}
	})
}

// FromProofs encodes a list.
func FromProofs(list []pipeline.Proof) []*Proof {
	return each(list, func(p pipeline.Proof) *Proof {
		return &Proof{Name: p.Name, Value: p.Value, Low: p.Low, High: p.High, Unit: p.Unit, Ok: p.OK, Reason: p.Reason}
	})
}

// ToProofs decodes a list.
func ToProofs(list []*Proof) []pipeline.Proof {
	return each(list, func(p *Proof) pipeline.Proof {
		return pipeline.Proof{Name: p.GetName(), Value: p.GetValue(), Low: p.GetLow(), High: p.GetHigh(), Unit: p.GetUnit(), OK: p.GetOk(), Reason: p.GetReason()}
	})
}

// FromCoverage encodes a coverage; one that says nothing is nil.
func FromCoverage(c pipeline.Coverage) *Coverage {
	if c == (pipeline.Coverage{}) {
		return nil
	}
	return &Coverage{Share: c.Share, Background: c.Background, Noise: c.Noise, SaturatedPx: int64(c.SaturatedPx), MaskedPx: int64(c.MaskedPx)}
}

// ToCoverage decodes a coverage.
func ToCoverage(c *Coverage) pipeline.Coverage {
	return pipeline.Coverage{Share: c.GetShare(), Background: c.GetBackground(), Noise: c.GetNoise(),
		SaturatedPx: int(c.GetSaturatedPx()), MaskedPx: int(c.GetMaskedPx())}
}

// FromMask encodes a mask; nil is nil.
func FromMask(m *raster.Mask) *Mask {
	if m == nil {
		return nil
	}
	return &Mask{Width: int32(m.Width), Height: int32(m.Height), Runs: fromSpans(m.Spans())}
}

// ToMask decodes a mask; nil is nil. The error says what is wrong with its size or runs.
func ToMask(m *Mask) (*raster.Mask, error) {
	if m == nil {
		return nil, nil
	}
	width, height := int(m.GetWidth()), int(m.GetHeight())
	if err := checkSides(width, height); err != nil {
		return nil, err
	}
	spans, err := toSpans(m.GetRuns(), width, height)
	if err != nil {
		return nil, err
	}
	out := raster.NewMask(width, height)
	out.FillSpans(spans)
	return out, nil
}

func checkSides(width, height int) error {
	if width < 1 || height < 1 || width > raster.MaxSide || height > raster.MaxSide {
		return fmt.Errorf("got %d × %d px, want 1 to %d a side", width, height, raster.MaxSide)
	}
	return nil
}

func fromSpans(spans []raster.Span) []int32 {
	out := make([]int32, 0, 3*len(spans))
	for _, s := range spans {
		out = append(out, int32(s.Y), int32(s.X0), int32(s.X1))
	}
	return out
}

// toSpans refuses runs that leave the picture, and more of them than it has pixels.
func toSpans(runs []int32, width, height int) ([]raster.Span, error) {
	if len(runs)%3 != 0 {
		return nil, fmt.Errorf("runs: got %d numbers, want y, x0 and x1 of each run", len(runs))
	}
	var out []raster.Span
	left := width * height
	for i := 0; i < len(runs); i += 3 {
		s := raster.Span{Y: int(runs[i]), X0: int(runs[i+1]), X1: int(runs[i+2])}
		if s.Y < 0 || s.Y >= height || s.X0 < 0 || s.X1 > width || s.X0 > s.X1 {
			return nil, fmt.Errorf("runs: run y %d, x %d to %d leaves the picture of %d × %d px", s.Y, s.X0, s.X1, width, height)
		}
		if left -= s.Len(); left < 0 {
			return nil, fmt.Errorf("runs: they overlap, together they hold more than the picture's %d × %d px", width, height)
		}
		out = append(out, s)
	}
	return out, nil
}
