package report

import (
	_ "embed"
	"fmt"
	"html/template"
	"io"
	"math"
	"slices"
	"strings"

	"lapgate/server/volume"
	"lapgate/server/volume/cost"
	"lapgate/server/volume/plan"
)

//go:embed volume.html
var volumePage string

// volumeView is what the page shows, in the order of the page.
type volumeView struct {
	Plan       *plan.Plan
	Result     *volume.Result
	Overview   template.HTML
	Ranges     []volumeRange
	Turns      []crossoverRow
	Others     []crossoverRow
	Processes  []volumeProcess
	Quantities []volumeQuantity
	Parts      []volumePart
	Threshold  template.HTML
}

type volumeRange struct {
	From, To, Best, Other, Colour string
	Certain                       bool
}

type volumeProcess struct {
	Name  string
	Chart template.HTML
}

type volumeQuantity struct {
	Good, Best string
	Rows       []volumeRow
	Worth      *volume.Information
}

type volumeRow struct {
	Name                    string
	Best, Outside           bool
	Cell                    volume.Cell
	Bars                    []volumeBar
	Cost, Low, High, Starts string
}

// volumeBar is one part as a piece of a bar, in percent of the widest bar.
type volumeBar struct {
	Part, Colour, Cost string
	From, Width        float64
}

type volumePart struct{ Name, Colour string }

// WriteVolume writes an evaluated plan as one self-contained HTML page.
func WriteVolume(w io.Writer, p *plan.Plan, r *volume.Result) error {
	page, err := parsePage("volume", volumePage, template.FuncMap{
		"units": groupThousands, "percent": func(v float64) string { return fmt.Sprintf("%.1f %%", 100*v) },
		"share": func(v float64) string { return fmt.Sprintf("%.3g %%", 100*v) },
		"round": func(v float64) string { return fmt.Sprintf("%.0f", v) }, "money": volumeMoney,
		"fine": func(v float64) string { return fmt.Sprintf("%.4f", v) },
		"path": func(s string) template.HTML {
			return template.HTML(strings.ReplaceAll(template.HTMLEscapeString(s), ".", ".<wbr>"))
		},
	})
	if err != nil {
		return err
	}
	view, err := viewVolume(p, r)
	if err != nil {
		return err
	}
	return page.Execute(w, view)
}

func viewVolume(p *plan.Plan, r *volume.Result) (*volumeView, error) {
	v := &volumeView{Plan: p, Result: r, Ranges: volumeRanges(r), Turns: turnRows(r), Others: otherRows(r)}
	for i, name := range volumePartNames() {
		v.Parts = append(v.Parts, volumePart{name, partColour(i)})
	}
	for _, q := range r.Quantities {
		if q.Asked {
			v.Quantities = append(v.Quantities, viewQuantity(r, q))
		}
	}
	var err error
	if v.Overview, err = drawVolumeOverview(r); err != nil {
		return nil, err
	}
	for _, process := range p.Processes {
		chart, err := drawVolumeProcess(r, process.Name)
		if err != nil {
			return nil, err
		}
		v.Processes = append(v.Processes, volumeProcess{process.Name, chart})
	}
	if r.Threshold != nil {
		v.Threshold, err = drawVolumeThreshold(r)
	}
	return v, err
}

func volumeRanges(r *volume.Result) []volumeRange {
	leaders := volumeLeaders(r)
	var all []volumeRange
	for _, x := range r.Ranges {
		one := volumeRange{From: groupThousands(x.From), To: groupThousands(x.To), Best: r.Combinations[x.Best].String(),
			Certain: x.Certain, Colour: lineColourHex(slices.Index(leaders, x.Best))}
		if x.RunnerUp >= 0 {
			one.Other = r.Combinations[x.RunnerUp].String()
		}
		all = append(all, one)
	}
	return all
}

// viewQuantity orders the combinations from cheap to dear.
func viewQuantity(r *volume.Result, q volume.Quantity) volumeQuantity {
	v := volumeQuantity{Good: groupThousands(q.Good), Best: r.Combinations[q.Best].String()}
	order := make([]int, len(q.Cells))
	widest := 0.0
	for i, c := range q.Cells {
		order[i] = i
		widest = math.Max(widest, math.Min(float64(c.Cost), 4*float64(q.Cells[q.Best].Cost)))
	}
	slices.SortStableFunc(order, func(a, b int) int {
		if q.Cells[a].Cost < q.Cells[b].Cost {
			return -1
		}
		return 1
	})
	for _, i := range order {
		c := q.Cells[i]
		v.Rows = append(v.Rows, volumeRow{Name: r.Combinations[i].String(), Best: i == q.Best, Outside: c.OutsideUsual, Cell: c,
			Bars: volumeBars(c.Parts, widest), Cost: volumeMoney(c.Cost), Low: volumeMoney(c.Low), High: volumeMoney(c.High),
			Starts: groupThousands(math.Ceil(c.Starts))})
	}
	for i := range r.Information {
		if r.Information[i].Good == q.Good {
			v.Worth = &r.Information[i]
		}
	}
	return v
}

func volumePartNames() []string {
	return []string{"tooling", "making", "scrap", "inspection", "false rejects", "holds", "escapes", "rework"}
}

// volumeBars lays the parts of a cost end to end; a negative part (scrap worth
// more than its making) is left out of the bar, and what runs past the widest
// bar is cut off.
func volumeBars(p cost.Parts, widest float64) []volumeBar {
	var bars []volumeBar
	at := 0.0
	for i, v := range []float64{p.Tooling, p.Making, p.Scrap, p.Inspection, p.FalseRejects, p.Holds, p.Escapes, p.Rework} {
		width := math.Min(100*v/widest, 100-at)
		if width < 0.05 {
			continue
		}
		bars = append(bars, volumeBar{volumePartNames()[i], partColour(i), fmt.Sprintf("%.2f", v), at, width})
		at += width
	}
	return bars
}

func volumeMoney(m volume.Money) string {
	if math.IsNaN(float64(m)) || math.IsInf(float64(m), 0) {
		return "unbounded"
	}
	if m >= 10000 {
		return groupThousands(float64(m))
	}
	return fmt.Sprintf("%.2f", float64(m))
}

// groupThousands writes a whole number with narrow blanks between thousands.
func groupThousands(v float64) string {
	text := fmt.Sprintf("%.0f", v)
	var groups []string
	for len(text) > 3 && text[len(text)-4] != '-' {
		groups = append([]string{text[len(text)-3:]}, groups...)
		text = text[:len(text)-3]
	}
	return strings.Join(append([]string{text}, groups...), "\u202f")
}
