package report

import (
	"bytes"
	"image/color"
	"math"
	"time"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgsvg"

	"lapgate/pipeline"
)

// MasterShowing is one showing of a master in its history.
type MasterShowing struct {
	At        time.Time
	Value     *float64 // nil = its defect was not found
	Low, High *float64 // bounds at that time; nil = none
	Result    string   // pass, fail or void
}

// DrawMaster draws a master's measure over time with its bounds as an SVG picture. A
// showing that found no defect stands at the lower edge. Times are in the location of
// the first showing. No showing at all is an error.
func DrawMaster(title, measure string, showings []MasterShowing) ([]byte, error) {
	if len(showings) == 0 {
		return nil, pipeline.Invalid("chart of %s: there is no showing to draw", title)
	}
	p := newPlot("", measure)
	p.Title.Text, p.Title.TextStyle.Font = title, p.X.Label.TextStyle.Font
	p.X.Tick.Marker = evenTimes{showings[0].At.Location()}
	p.Legend.Top = true
	for _, of := range []func(MasterShowing) *float64{func(s MasterShowing) *float64 { return s.Low }, func(s MasterShowing) *float64 { return s.High }} {
		if err := addBound(p, showings, of); err != nil {
			return nil, err
		}
	}
	if err := addValues(p, showings); err != nil {
		return nil, err
	}
	p.X.Min, p.X.Max = widened(p.X.Min, p.X.Max, 3600)
	p.Y.Min, p.Y.Max = widened(p.Y.Min, p.Y.Max, 1)
	p.Y.Max += (p.Y.Max - p.Y.Min) / 5 // for the legend
	if err := addNotFound(p, showings); err != nil {
		return nil, err
	}
	c := vgsvg.New(24*vg.Centimeter, 10*vg.Centimeter)
	p.Draw(draw.New(c))
	var out bytes.Buffer
	_, err := c.WriteTo(&out)
	return out.Bytes(), err
}

// widened gives an axis room: a twentieth on each side, or the least where it is a point.
func widened(low, high, least float64) (float64, float64) {
	if math.IsInf(low, 0) || math.IsInf(high, 0) { // nothing was drawn
		low, high = 0, 0
	}
	room := max((high-low)/20, least*0.05)
	return low - room, high + room
}

// evenTimes puts ticks at whole hours or days of a place.
type evenTimes struct{ in *time.Location }

// Ticks implements plot.Ticker; min and max are seconds since 1970.
func (e evenTimes) Ticks(from, to float64) []plot.Tick {
	step := 366 * 24
	for _, hours := range []int{1, 3, 6, 12, 24, 48, 7 * 24, 28 * 24, 91 * 24} {
		if (to-from)/3600/float64(hours) <= 8 {
			step = hours
			break
		}
	}
	start := time.Unix(int64(from), 0).In(e.in)
	at := time.Date(start.Year(), start.Month(), start.Day(), 0, 0, 0, 0, e.in)
	var out []plot.Tick
	for ; float64(at.Unix()) <= to; at = time.Date(at.Year(), at.Month(), at.Day(), at.Hour()+step, 0, 0, 0, e.in) {
		if float64(at.Unix()) >= from {
			out = append(out, plot.Tick{Value: float64(at.Unix()), Label: at.Format("2006-01-02\n15:04")})
		}
	}
	return out
}

// addBound draws a bound as a broken line through the showings that have it.
func addBound(p *plot.Plot, showings []MasterShowing, of func(MasterShowing) *float64) error {
	var at plotter.XYs
	for _, s := range showings {
		if v := of(s); v != nil {
			at = append(at, plotter.XY{X: float64(s.At.Unix()), Y: *v})
		}
	}
	if len(at) == 0 {
		return nil
	}
	line, err := plotter.NewLine(at)
	if err != nil {
		return err
	}
	line.Color, line.Width, line.Dashes = lineColour(1), vg.Points(1.2), []vg.Length{vg.Points(5), vg.Points(3)}
	p.Add(line)
	return nil
}

// addValues draws a line through all that was measured, and a mark for each by its result.
func addValues(p *plot.Plot, showings []MasterShowing) error {
	all := plotter.XYs{}
	by := map[string]plotter.XYs{}
	for _, s := range showings {
		if s.Value != nil {
			at := plotter.XY{X: float64(s.At.Unix()), Y: *s.Value}
			all, by[s.Result] = append(all, at), append(by[s.Result], at)
		}
	}
	if len(all) == 0 {
		return nil
	}
	line, err := plotter.NewLine(all)
	if err != nil {
		return err
	}
	line.Color, line.Width = paler(lineColour(0), 0.5), vg.Points(1)
	p.Add(line)
	for _, m := range []struct {
		result string
		colour color.RGBA
		shape  draw.GlyphDrawer
	}{{"pass", lineColour(0), draw.CircleGlyph{}}, {"fail", lineColour(1), draw.BoxGlyph{}}, {"void", lineColour(6), draw.RingGlyph{}}} {
		if err := addMarks(p, m.result, by[m.result], m.colour, m.shape); err != nil {
			return err
		}
	}
	return nil
}

func addMarks(p *plot.Plot, name string, at plotter.XYs, colour color.RGBA, shape draw.GlyphDrawer) error {
	if len(at) == 0 {
		return nil
	}
	marks, err := plotter.NewScatter(at)
	if err != nil {
		return err
	}
	marks.Color, marks.Shape, marks.Radius = colour, shape, vg.Points(3)
	p.Add(marks)
	p.Legend.Add(name, marks)
	return nil
}

// addNotFound marks the showings that found no defect at the lower edge.
func addNotFound(p *plot.Plot, showings []MasterShowing) error {
	var at plotter.XYs
	for _, s := range showings {
		if s.Value == nil {
			at = append(at, plotter.XY{X: float64(s.At.Unix()), Y: p.Y.Min})
		}
	}
	return addMarks(p, "not found", at, lineColour(1), draw.CrossGlyph{})
}
