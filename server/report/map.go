package report

import (
	_ "embed"
	"fmt"
	"html/template"
	"io"
	"slices"

	"lapgate/pipeline"
)

//go:embed map.svg
var mapPicture string

//go:embed map.html
var mapPage string

// DefectMap is where the defects of many units lie.
type DefectMap struct {
	Title        string
	Coordinates  string // part, station or camera
	Unit         string // of places: um (v up) or px (y down)
	Points       []MapPoint
	Zones        []MapZone
	Units        int // on the map
	LeftOut      int // units whose angle is not known
	LeftOutNames []string
	WidthPx      int // of the frame, in camera coordinates
	HeightPx     int
	Truncated    bool // there is more than a map holds
}

// MapPoint is one defect.
type MapPoint struct {
	Unit, Kind, Zone string
	X, Y             float64
	SizeUM           float64
	Verdict          pipeline.Verdict // of the unit
}

// MapZone is a zone of the limits.
type MapZone struct {
	Name                         string
	X, Y                         float64 // of its centre
	OuterDiameter, InnerDiameter float64
}

// MapRow counts the defects of a kind in a zone.
type MapRow struct {
	Zone    string  `json:"zone"`
	Kind    string  `json:"kind"`
	Defects int     `json:"defects"`
	PerUnit float64 `json:"per_unit"`
	Units   int     `json:"units"` // with one at least
}

// Rows counts by zone and kind, the most frequent first.
func (m DefectMap) Rows() []MapRow {
	at := map[[2]string]int{}
	units := map[[3]string]bool{}
	var out []MapRow
	for _, p := range m.Points {
		key := [2]string{p.Zone, p.Kind}
		i, known := at[key]
		if !known {
			i = len(out)
			at[key] = i
			out = append(out, MapRow{Zone: p.Zone, Kind: p.Kind})
		}
		out[i].Defects++
		if one := [3]string{p.Zone, p.Kind, p.Unit}; !units[one] {
			units[one] = true
			out[i].Units++
		}
	}
	for i := range out {
		out[i].PerUnit = float64(out[i].Defects) / float64(max(m.Units, 1))
	}
	slices.SortStableFunc(out, func(a, b MapRow) int { return b.Defects - a.Defects })
	return out
}

// WriteMapPicture writes a map as an SVG picture.
func WriteMapPicture(w io.Writer, m DefectMap) error {
	t, err := template.New("picture").Funcs(mapFunctions()).Parse(mapPicture)
	if err != nil {
		return err
	}
	return t.ExecuteTemplate(w, "map", drawMap(m, true))
}

// WriteMap writes a map as one self-contained HTML page.
func WriteMap(w io.Writer, m DefectMap) error {
	page, err := parsePage("page", mapPage, mapFunctions())
	if err != nil {
		return err
	}
	if page, err = page.Parse(mapPicture); err != nil {
		return err
	}
	return page.ExecuteTemplate(w, "page", map[string]any{"Map": m, "Picture": drawMap(m, false), "Rows": m.Rows(),
		"Cautions": m.cautions(), "MoreLeftOut": m.LeftOut - len(m.LeftOutNames)})
}

func mapFunctions() template.FuncMap {
	return template.FuncMap{"px": func(v float64) string { return fmt.Sprintf("%.1f", v) }}
}

func (m DefectMap) cautions() []string {
	var out []string
	if m.LeftOut > 0 {
		out = append(out, fmt.Sprintf("%d of %d units are left out: their angle is not known, so where their defects lie on the part is not either.", m.LeftOut, m.LeftOut+m.Units))
	}
	if m.Truncated {
		out = append(out, "There are more units or defects than a map holds; the newest are on it. Choose a lot or a span of time.")
	}
	if m.Units < 30 {
		out = append(out, fmt.Sprintf("%d units are few: what looks like a pattern may be chance.", m.Units))
	}
	return out
}
