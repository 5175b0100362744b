package report

import (
	"bytes"
	"fmt"
	"html/template"
	"image/color"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgsvg"

	"lapgate/server/volume"
)

// lineColours can be told apart by people with the usual colour blindness.
// Source: Okabe and Ito 2008.
func lineColours() []color.RGBA {
	return []color.RGBA{{0, 114, 178, 255}, {213, 94, 0, 255}, {0, 158, 115, 255}, {204, 121, 167, 255},
		{230, 159, 0, 255}, {86, 180, 233, 255}, {60, 60, 60, 255}, {160, 150, 0, 255}}
}

func lineColour(i int) color.RGBA {
	all := lineColours()
	return all[((i%len(all))+len(all))%len(all)]
}

func lineColourHex(i int) string {
	c := lineColour(i)
	return fmt.Sprintf("#%02x%02x%02x", c.R, c.G, c.B)
}

func partColour(i int) string {
	return []string{"#5b6b7b", "#0072b2", "#d55e00", "#009e73", "#cc79a7", "#e69f00", "#a00030", "#56b4e9"}[i]
}

// paler mixes a colour with white.
func paler(c color.RGBA, share float64) color.RGBA {
	mix := func(v uint8) uint8 { return uint8(float64(v)*share + 255*(1-share)) }
	return color.RGBA{mix(c.R), mix(c.G), mix(c.B), 255}
}

// volumeLeaders are the combinations worth drawing together: those that are
// cheapest somewhere, or in one draw of twenty.
func volumeLeaders(r *volume.Result) []int {
	var leaders []int
	for _, q := range r.Quantities {
		for i, c := range q.Cells {
			if (i == q.Best || c.ChanceBest >= 0.05) && !slices.Contains(leaders, i) {
				leaders = append(leaders, i)
			}
		}
	}
	return leaders
}

// drawVolumeOverview draws the leaders with their bands, and under them the
// strip of the cheapest combination, pale where it is not certain.
func drawVolumeOverview(r *volume.Result) (template.HTML, error) {
	p := newCostPlot(r)
	var names []string
	leaders := volumeLeaders(r)
	for k, i := range leaders {
		if err := addCostLine(p, r, i, lineColour(k), true); err != nil {
			return "", err
		}
		names = append(names, r.Combinations[i].String())
	}
	addCostLegend(p, names)
	if err := addWinnerStrip(p, r, leaders); err != nil {
		return "", err
	}
	return svgOf(p, 26*vg.Centimeter, 15*vg.Centimeter)
}

// drawVolumeProcess draws all inspection options of one process.
func drawVolumeProcess(r *volume.Result, process string) (template.HTML, error) {
	p := newCostPlot(r)
	var names []string
	for i, c := range r.Combinations {
		if c.Process != process {
			continue
		}
		if err := addCostLine(p, r, i, lineColour(len(names)), false); err != nil {
			return "", err
		}
		names = append(names, c.Inspection)
	}
	addCostLegend(p, names)
	return svgOf(p, 10*vg.Centimeter, 9*vg.Centimeter)
}

func newCostPlot(r *volume.Result) *plot.Plot {
	p := newPlot("good units shipped", r.Currency+" per good unit")
	p.X.Scale, p.Y.Scale = plot.LogScale{}, plot.LogScale{}
	p.X.Tick.Marker, p.Y.Tick.Marker = plainLogTicks{}, plainLogTicks{}
	return p
}

// newPlot sets the house look: sans serif, light frame, ticks that do not touch.
func newPlot(x, y string) *plot.Plot {
	p := plot.New()
	sans := func(f *font.Font, size float64) {
		f.Typeface, f.Variant, f.Size = "Liberation", "Sans", vg.Points(size)
	}
	for _, axis := range []*plot.Axis{&p.X, &p.Y} {
		sans(&axis.Label.TextStyle.Font, 11)
		sans(&axis.Tick.Label.Font, 10)
		axis.LineStyle.Color, axis.Tick.LineStyle.Color = color.Gray{120}, color.Gray{120}
		axis.Padding = vg.Points(3)
	}
	sans(&p.Legend.TextStyle.Font, 10)
	p.X.Label.Text, p.Y.Label.Text = x, y
	p.X.Label.Padding, p.Y.Label.Padding = vg.Points(4), vg.Points(4)
	grid := plotter.NewGrid()
	grid.Horizontal.Color, grid.Vertical.Color = color.Gray{225}, color.Gray{225}
	p.Add(grid)
	return p
}

// addCostLine adds one combination, with the band of its interval if asked.
// Costs beyond bounds are left out.
func addCostLine(p *plot.Plot, r *volume.Result, i int, c color.RGBA, band bool) error {
	var line, low, high plotter.XYs
	for _, q := range r.Quantities {
		cell := q.Cells[i]
		line = append(line, plotter.XY{X: q.Good, Y: float64(cell.Cost)})
		if h := float64(cell.High); !math.IsInf(h, 0) && cell.Low > 0 {
			low, high = append(low, plotter.XY{X: q.Good, Y: float64(cell.Low)}), append(high, plotter.XY{X: q.Good, Y: h})
		}
	}
	if band && len(low) > 1 {
		slices.Reverse(high)
		area, err := plotter.NewPolygon(append(low, high...))
		if err != nil {
			return err
		}
		area.Color, area.LineStyle.Width = color.NRGBA{c.R, c.G, c.B, 50}, 0
		p.Add(area)
	}
	l, err := plotter.NewLine(line)
	if err != nil {
		return err
	}
	l.Color, l.Width = c, vg.Points(1.6)
	p.Add(l)
	return nil
}

func addCostLegend(p *plot.Plot, names []string) {
	for k, name := range names {
		p.Legend.Add(name, swatch{lineColour(k)})
	}
	p.Legend.Top = true
	p.Legend.Padding = vg.Points(2)
	p.Legend.ThumbnailWidth = vg.Points(18)
	p.Legend.XOffs, p.Legend.YOffs = -vg.Points(6), -vg.Points(4)
}

// swatch is a legend's piece of line.
type swatch struct{ c color.Color }

// Thumbnail draws the piece across the middle.
func (s swatch) Thumbnail(c *draw.Canvas) {
	y := (c.Min.Y + c.Max.Y) / 2
	c.StrokeLine2(draw.LineStyle{Color: s.c, Width: vg.Points(2.5)}, c.Min.X, y, c.Max.X, y)
}

// addWinnerStrip fills the foot of the plot with the colour of the cheapest
// combination. Neighbouring ranges meet half way on the log scale.
func addWinnerStrip(p *plot.Plot, r *volume.Result, leaders []int) error {
	bottom := p.Y.Min / math.Pow(p.Y.Max/p.Y.Min, 0.10)
	top := p.Y.Min / math.Pow(p.Y.Max/p.Y.Min, 0.03)
	for k, x := range r.Ranges {
		from, to := x.From, x.To
		if k > 0 {
			from = math.Sqrt(from * r.Ranges[k-1].To)
		}
		if k+1 < len(r.Ranges) {
			to = math.Sqrt(to * r.Ranges[k+1].From)
		}
		area, err := plotter.NewPolygon(plotter.XYs{{X: from, Y: bottom}, {X: to, Y: bottom}, {X: to, Y: top}, {X: from, Y: top}})
		if err != nil {
			return err
		}
		c := lineColour(slices.Index(leaders, x.Best))
		area.Color, area.LineStyle.Width = c, 0
		if !x.Certain {
			area.Color = paler(c, 0.35)
		}
		p.Add(area)
	}
	p.Y.Min = bottom
	return nil
}

// plainLogTicks labels 1, 2 and 5 of every decade, or whole decades where that
// would crowd, in plain figures.
type plainLogTicks struct{}

// Ticks implements plot.Ticker.
func (plainLogTicks) Ticks(low, high float64) []plot.Tick {
	var ticks []plot.Tick
	crowded := math.Log10(high/low) > 3
	for e := math.Floor(math.Log10(low)); e <= math.Ceil(math.Log10(high)); e++ {
		for m := 1.0; m < 10; m++ {
			v := m * math.Pow(10, e)
			if v < low*0.999 || v > high*1.001 {
				continue
			}
			tick := plot.Tick{Value: v}
			if m == 1 || (!crowded && (m == 2 || m == 5)) {
				tick.Label = tickText(v)
			}
			ticks = append(ticks, tick)
		}
	}
	return ticks
}

// tickText shortens from a hundred thousand on, where labels would touch.
func tickText(v float64) string {
	switch {
	case v >= 1e6:
		return fmt.Sprintf("%.4g\u00a0M", v/1e6)
	case v >= 1e5:
		return fmt.Sprintf("%.4g\u00a0k", v/1e3)
	}
	if v >= 1 {
		return strings.ReplaceAll(groupThousands(v), "\u202f", "\u00a0")
	}
	return fmt.Sprintf("%.3g", v)
}

// svgOf draws a plot as inline SVG that scales with the page.
func svgOf(p *plot.Plot, width, height vg.Length) (template.HTML, error) {
	canvas := vgsvg.New(width, height)
	p.Draw(draw.New(canvas))
	var out bytes.Buffer
	if _, err := canvas.WriteTo(&out); err != nil {
		return "", err
	}
	text := out.String()
	text = text[strings.Index(text, "<svg"):]
	head, rest, _ := strings.Cut(text, ">")
	box := fmt.Sprintf(`<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %.4g %.4g" role="img"`, width.Points(), height.Points())
	if i := strings.Index(head, "viewBox="); i >= 0 {
		quoted, _, _ := strings.Cut(head[i+len(`viewBox="`):], `"`)
		box = `<svg xmlns="http://www.w3.org/2000/svg" viewBox="` + quoted + `" role="img"`
	}
	rest = strings.ReplaceAll(rest, "font-family:Liberation Sans", "font-family:'Liberation Sans',Arial,Helvetica,sans-serif")
	return template.HTML(box + ">" + rest), nil
}
