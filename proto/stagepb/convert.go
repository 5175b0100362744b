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
		return &Proof{Name: p.Name, Value: p.Value, Low: p.Low, High: p.High, Unit: p.Unit, Ok: p.OK, Reason: p.Reason,
			WarnLow: p.WarnLow, WarnHigh: p.WarnHigh, Warning: p.Warning}
	})
}

// ToProofs decodes a list.
func ToProofs(list []*Proof) []pipeline.Proof {
	return each(list, func(p *Proof) pipeline.Proof {
		return pipeline.Proof{Name: p.GetName(), Value: p.GetValue(), Low: p.GetLow(), High: p.GetHigh(), Unit: p.GetUnit(), OK: p.GetOk(), Reason: p.GetReason(),
			WarnLow: p.GetWarnLow(), WarnHigh: p.GetWarnHigh(), Warning: p.GetWarning()}
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

// FromGrid encodes a grid; nil is nil.
func FromGrid(g *raster.Grid) *Grid {
	if g == nil {
		return nil
	}
	return &Grid{CellPx: int32(g.CellPx), Columns: int32(g.Columns), Rows: int32(g.Rows), Level: g.Level, Noise: g.Noise,
		Inside: each(g.Inside, to32), Valid: each(g.Valid, to32), Filled: g.Filled}
}

// ToGrid decodes a grid and checks that every cell is there; nil is nil.
func ToGrid(g *Grid) (*raster.Grid, error) {
	if g == nil {
		return nil, nil
	}
	out := &raster.Grid{CellPx: int(g.GetCellPx()), Columns: int(g.GetColumns()), Rows: int(g.GetRows()), Level: g.GetLevel(), Noise: g.GetNoise(),
		Inside: each(g.GetInside(), from32), Valid: each(g.GetValid(), from32), Filled: g.GetFilled()}
	return out, checkCells("grid", out.CellPx, out.Columns, out.Rows, len(out.Level), len(out.Noise), len(out.Inside), len(out.Valid), len(out.Filled))
}

// FromCoverageMap encodes a map; nil is nil.
func FromCoverageMap(m *pipeline.CoverageMap) *CoverageMap {
	if m == nil {
		return nil
	}
	return &CoverageMap{CellPx: int32(m.CellPx), Columns: int32(m.Columns), Rows: int32(m.Rows), DigUm: each(m.DigUM, to32), ScratchUm: each(m.ScratchUM, to32),
		NoisyShare: m.NoisyShare, UnseenShare: m.UnseenShare, SaturatedShare: m.SaturatedShare}
}

// ToCoverageMap decodes a map and checks that every cell is there; nil is nil.
func ToCoverageMap(m *CoverageMap) (*pipeline.CoverageMap, error) {
	if m == nil {
		return nil, nil
	}
	out := &pipeline.CoverageMap{CellPx: int(m.GetCellPx()), Columns: int(m.GetColumns()), Rows: int(m.GetRows()), DigUM: each(m.GetDigUm(), from32), ScratchUM: each(m.GetScratchUm(), from32),
		NoisyShare: m.GetNoisyShare(), UnseenShare: m.GetUnseenShare(), SaturatedShare: m.GetSaturatedShare()}
	var lists []int
	for _, n := range []int{len(out.DigUM), len(out.ScratchUM)} {
		if n > 0 {
			lists = append(lists, n)
		}
	}
	return out, checkCells("coverage_map", out.CellPx, out.Columns, out.Rows, lists...)
}

func to32(v int) int32 { return int32(v) }

func from32(v int32) int { return int(v) }

func checkCells(what string, cell, columns, rows int, lists ...int) error {
	if cell < 1 || columns < 1 || rows < 1 || columns > raster.MaxSide || rows > raster.MaxSide {
		return fmt.Errorf("%s: got %d × %d cells of %d px, want 1 or more of each", what, columns, rows, cell)
	}
	for _, n := range lists {
		if n != columns*rows {
			return fmt.Errorf("%s: got %d values, want one for each of %d × %d cells", what, n, columns, rows)
		}
	}
	return nil
}
