package report

import (
	"fmt"
	"math"
	"slices"
	"strconv"

	"lapgate/pipeline"
)

// Sizes of a map's picture, in its own px.
const (
	mapSide    = 720. // of the drawing
	mapHead    = 62.  // above it, with a title
	mapMargin  = 20.
	mapFoot    = 64.  // below it
	mapCell    = 8.   // of the ground's raster
	mapSigma   = 26.  // of the Gaussian that smooths the ground
	mapMark    = 3.2  // radius
	mapDarkest = 0.55 // opacity of the densest cell
	mapFaint   = 0.06 // share of the densest below which a cell is left white
)

// mapDrawing is a map in px of its picture.
type mapDrawing struct {
	Title, Subtitle             string
	Headed                      bool
	Clip                        *mapRing
	Width, Height               float64
	Frame                       *mapBox
	Discs, Rings                []mapRing
	Cells                       []groundCell
	Cross                       *mapCross
	Marks                       []mapMarkAt
	BarX, BarY, BarLength       float64
	BarTextY                    float64
	BarText                     string
	Legend                      []mapLegend
	Smoothed, Densest           string  // of the ground
	top                         float64 // of the drawing
	scale, originX, originY, up float64 // up: −1 where y goes up
}

type mapBox struct{ X, Y, W, H float64 }

type mapRing struct {
	X, Y, R, LabelX, LabelY float64
	Label                   string
}

type groundCell struct {
	mapBox
	Opacity string
}

type mapCross struct{ X, Y, X0, X1, Y0, Y1 float64 }

type mapMarkAt struct {
	X, Y, R  float64
	Colour   string
	Rejected bool
	Name     string
}

type mapLegend struct {
	X, Y, TextX, TextY float64
	Colour, Text       string
}

func drawMap(m DefectMap, headed bool) *mapDrawing {
	d := &mapDrawing{Title: m.Title, Headed: headed, up: 1, top: mapMargin}
	if headed {
		d.top = mapHead
	}
	d.Subtitle = fmt.Sprintf("%d defects on %d units, in coordinates of the %s", len(m.Points), m.Units, m.Coordinates)
	if m.LeftOut > 0 {
		d.Subtitle += fmt.Sprintf("; %d units left out, angle unknown", m.LeftOut)
	}
	d.place(m)
	for _, z := range m.Zones {
		d.zone(z)
	}
	d.labels()
	d.ground(m)
	for _, p := range m.Points {
		x, y := d.at(p.X, p.Y)
		d.Marks = append(d.Marks, mapMarkAt{X: x, Y: y, R: mapMark, Colour: kindColour(p.Kind), Rejected: p.Verdict != pipeline.Accept,
			Name: fmt.Sprintf("%s: %s of %.0f µm in %s (%s)", p.Unit, p.Kind, p.SizeUM, p.Zone, p.Verdict)})
	}
	d.bar(m.Unit)
	d.legend(m)
	return d
}

// place chooses scale and origin: the frame in camera coordinates, else all zones and points.
func (d *mapDrawing) place(m DefectMap) {
	if m.Unit == "px" && m.WidthPx > 0 && m.HeightPx > 0 {
		d.scale = mapSide / float64(max(m.WidthPx, m.HeightPx))
		d.originX, d.originY = mapMargin, d.top
		w, h := d.scale*float64(m.WidthPx), d.scale*float64(m.HeightPx)
		d.Width, d.Height = w+2*mapMargin, h+d.top+mapFoot
		d.Frame = &mapBox{mapMargin, d.top, w, h}
		return
	}
	reach := 0.
	for _, z := range m.Zones {
		reach = max(reach, math.Hypot(z.X, z.Y)+z.OuterDiameter/2)
	}
	for _, p := range m.Points {
		reach = max(reach, math.Hypot(p.X, p.Y))
	}
	if reach == 0 {
		reach = 1
	}
	d.scale, d.up = mapSide/(2*1.04*reach), -1
	d.originX, d.originY = mapMargin+mapSide/2, d.top+mapSide/2
	d.Width, d.Height = mapSide+2*mapMargin, mapSide+d.top+mapFoot
	d.Cross = &mapCross{X: d.originX, Y: d.originY, X0: d.originX - 8, X1: d.originX + 8, Y0: d.originY - 8, Y1: d.originY + 8}
}

func (d *mapDrawing) at(x, y float64) (float64, float64) {
	return d.originX + d.scale*x, d.originY + d.up*d.scale*y
}

// ground is the density of the defects, a sum of Gaussians, in the cells of a raster.
func (d *mapDrawing) ground(m DefectMap) {
	for i, r := range d.Discs {
		if d.Clip == nil || r.R > d.Clip.R {
			d.Clip = &d.Discs[i]
		}
	}
	columns, rows := int(math.Ceil((d.Width-2*mapMargin)/mapCell)), int(math.Ceil((d.Height-d.top-mapFoot)/mapCell))
	density := make([]float64, columns*rows)
	reach := int(math.Ceil(3 * mapSigma / mapCell))
	for _, p := range m.Points {
		x, y := d.at(p.X, p.Y)
		cx, cy := (x-mapMargin)/mapCell-0.5, (y-d.top)/mapCell-0.5
		for row := max(int(cy)-reach, 0); row <= min(int(cy)+reach, rows-1); row++ {
			for column := max(int(cx)-reach, 0); column <= min(int(cx)+reach, columns-1); column++ {
				off := math.Hypot(float64(column)-cx, float64(row)-cy) * mapCell / mapSigma
				density[row*columns+column] += math.Exp(-off * off / 2)
			}
		}
	}
	if len(density) == 0 {
		return
	}
	most := slices.Max(density)
	for i, v := range density {
		if most > 0 && v >= mapFaint*most {
			x, y := mapMargin+mapCell*float64(i%columns), d.top+mapCell*float64(i/columns)
			d.Cells = append(d.Cells, groundCell{mapBox{x, y, mapCell, mapCell}, strconv.FormatFloat(mapDarkest*v/most, 'f', 3, 64)})
		}
	}
	d.Smoothed, d.Densest = d.length(m.Unit, mapSigma/d.scale), d.perArea(m.Unit, most/(2*math.Pi*mapSigma*mapSigma)*d.scale*d.scale)
}

func (d *mapDrawing) length(unit string, v float64) string {
	if unit == "um" {
		return fmt.Sprintf("%.2g mm", v/1000)
	}
	return fmt.Sprintf("%.3g px", v)
}

func (d *mapDrawing) perArea(unit string, v float64) string {
	if unit == "um" {
		return fmt.Sprintf("%.2g defects in a mm²", 1e6*v)
	}
	return fmt.Sprintf("%.2g defects in 100 × 100 px", 1e4*v)
}

func (d *mapDrawing) zone(z MapZone) {
	x, y := d.at(z.X, z.Y)
	outer := mapRing{X: x, Y: y, R: d.scale * z.OuterDiameter / 2, Label: z.Name}
	d.Discs = append(d.Discs, outer)
	d.Rings = append(d.Rings, outer)
	if z.InnerDiameter > 0 {
		d.Rings = append(d.Rings, mapRing{X: x, Y: y, R: d.scale * z.InnerDiameter / 2})
	}
}

// labels writes the names on their circles, each at an angle of its own so that circles
// close to each other stay legible.
func (d *mapDrawing) labels() {
	n := 0
	for i := range d.Rings {
		r := &d.Rings[i]
		if r.Label == "" {
			continue
		}
		sin, cos := math.Sincos(math.Pi * (-0.62 + 0.24*float64(n)))
		r.LabelX, r.LabelY = r.X+r.R*cos, r.Y+r.R*sin+4
		n++
	}
}

// bar draws a length of 1, 2 or 5 times a power of ten, at most a quarter of the picture.
func (d *mapDrawing) bar(unit string) {
	want := mapSide / 4 / d.scale
	step := math.Pow(10, math.Floor(math.Log10(want)))
	for _, k := range []float64{5, 2} {
		if k*step <= want {
			step *= k
			break
		}
	}
	d.BarX, d.BarY, d.BarLength = mapMargin, d.Height-26, d.scale*step
	d.BarTextY = d.BarY + 16
	d.BarText = fmt.Sprintf("%g px", step)
	if unit == "um" {
		d.BarText = fmt.Sprintf("%g µm", step)
		if step >= 1000 {
			d.BarText = fmt.Sprintf("%g mm", step/1000)
		}
	}
}

// legend names the kinds that are there, in the order of pipeline.Kinds.
func (d *mapDrawing) legend(m DefectMap) {
	counts := map[string]int{}
	for _, p := range m.Points {
		counts[p.Kind]++
	}
	x, y := mapMargin+mapSide/4+40, d.Height-26
	for _, k := range pipeline.Kinds() {
		n := counts[string(k)]
		if n == 0 {
			continue
		}
		text := fmt.Sprintf("%s %d", k, n)
		d.Legend = append(d.Legend, mapLegend{X: x, Y: y, TextX: x + 9, TextY: y + 4.5, Colour: kindColour(string(k)), Text: text})
		x += 34 + 7.2*float64(len(text))
	}
}

func kindColour(kind string) string {
	i := slices.Index(pipeline.Kinds(), pipeline.Kind(kind))
	return lineColourHex([]int{1, 2, 3, 4, 0, 5, 6, 7}[max(i, 0)%8])
}
