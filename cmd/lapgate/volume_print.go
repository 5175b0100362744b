package main

import (
	"fmt"
	"io"
	"math"
	"strings"
	"text/tabwriter"

	"lapgate/server/volume"
)

// volumePrinter writes the readable form and keeps the first error.
type volumePrinter struct {
	w   *tabwriter.Writer
	r   *volume.Result
	err error
}

func (p *volumePrinter) line(format string, args ...any) {
	if p.err == nil {
		_, p.err = fmt.Fprintf(p.w, format+"\n", args...)
	}
}

func (p *volumePrinter) title(format string, args ...any) {
	if p.err == nil {
		p.err = p.w.Flush()
	}
	p.line("\n"+format, args...)
}

func printVolume(w io.Writer, r *volume.Result) error {
	p := &volumePrinter{w: tabwriter.NewWriter(w, 0, 4, 2, ' ', 0), r: r}
	p.line("%s", r.Name)
	p.line("%s %s; intervals hold %.0f %% of %d draws (seed %d)", r.Currency, r.Basis, 100*r.Level, r.Draws, r.Seed)
	p.yields()
	for _, q := range r.Quantities {
		if q.Asked {
			p.quantity(q)
		}
	}
	p.ranges()
	p.crossovers()
	p.information()
	p.allOrNone()
	p.threshold()
	p.title("Cautions")
	for _, c := range r.Cautions {
		p.line("- %s", c)
	}
	if p.err != nil {
		return p.err
	}
	return p.w.Flush()
}

func (p *volumePrinter) yields() {
	p.title("Yields")
	p.line("process\tmeasured\tused\tinterval\tfrom")
	for _, y := range p.r.Yields {
		p.line("%s\t%.4f\t%.4f\t%.4f to %.4f\t%s", y.Process, y.Measured, y.Used, y.Low, y.High, y.From)
	}
}

func (p *volumePrinter) quantity(q volume.Quantity) {
	p.title("At %s good units", units(q.Good))
	p.line("\tprocess/inspection\tcost\tinterval\tcheapest in\tstart\tstations\twait s\tescapes ppm")
	for i, c := range q.Cells {
		mark, usual := "", ""
		if i == q.Best {
			mark = "*"
		}
		if c.OutsideUsual {
			usual = "  (outside its usual quantity)"
		}
		p.line("%s\t%s\t%s\t%s to %s\t%.1f %%\t%s\t%d\t%.1f\t%.0f%s", mark, p.r.Combinations[i], money(c.Cost), money(c.Low), money(c.High),
			100*c.ChanceBest, units(math.Ceil(c.Starts)), c.Stations.Count, c.Stations.WaitS, c.EscapesPerMillion, usual)
	}
}

func (p *volumePrinter) ranges() {
	p.title("Cheapest combination by quantity of good units")
	p.line("from\tto\tprocess/inspection\tcertainty")
	for _, r := range p.r.Ranges {
		sure := fmt.Sprintf("in at least %.0f %% of the draws", 100*p.r.Level)
		if !r.Certain {
			sure = "not certain"
			if r.RunnerUp >= 0 {
				sure += "; may be " + p.r.Combinations[r.RunnerUp].String()
			}
		}
		p.line("%s\t%s\t%s\t%s", units(r.From), units(r.To), p.r.Combinations[r.Best], sure)
	}
}

func (p *volumePrinter) information() {
	for _, info := range p.r.Information {
		p.title("What more data is worth at %s good units, %s for all of them", units(info.Good), p.r.Currency)
		p.line("everything known exactly\t%.0f", info.Perfect)
		for _, x := range info.Inputs {
			if x.Perfect >= 0.5 {
				p.line("%s known exactly\t%.0f", x.Input, x.Perfect)
			}
		}
		for _, s := range info.Samples {
			if s.Worth >= 0.5 {
				p.line("another %d inspected units of %s\t%.0f", s.Units, s.Process, s.Worth)
			}
		}
	}
}

func (p *volumePrinter) allOrNone() {
	if len(p.r.AllOrNone) == 0 {
		return
	}
	p.title("All-or-none rule (perfect inspection, known fraction) beside the plan")
	p.line("process/inspection\tnonconforming\tbreak-even\trule\tplan")
	for _, a := range p.r.AllOrNone {
		p.line("%s/%s\t%.4f\t%.4f\tinspect %s\tinspect %s", a.Process, a.Inspection, a.Bad, a.BreakEven, a.Rule, a.Model)
	}
}

func (p *volumePrinter) threshold() {
	t := p.r.Threshold
	if t == nil {
		return
	}
	p.title("Cost against the setting of %s/%s at %s good units", t.Process, t.Inspection, units(t.Good))
	p.line("\tsetting %s\tcost\tinterval\tescapes ppm\t", t.Unit)
	for i, s := range t.Settings {
		mark, allowed := "", ""
		if i == t.BestAllowed {
			mark = "*"
		}
		if !s.Allowed {
			allowed = fmt.Sprintf("looser than the drawing's %v", t.DrawingLimit)
		}
		p.line("%s\t%v\t%s\t%s to %s\t%.0f\t%s", mark, s.Setting, money(s.Cost), money(s.Low), money(s.High), s.EscapesPerMillion, allowed)
	}
	p.line("\tthe least-cost setting lies in %v to %v", t.Low, t.High)
}

func printBreakEvens(w io.Writer, currency string, all []*volume.BreakEven) error {
	for _, b := range all {
		_, err := fmt.Fprintf(w, "%s at which %s and %s cost the same at %s good units (now %v):\n", b.Unknown, b.First, b.Second, units(b.Quantity), b.Now)
		for _, v := range b.Values {
			cheaper := b.Second
			if v.FirstCheaper {
				cheaper = b.First
			}
			_, err = fmt.Fprintf(w, "  %.6g, where both cost %s %s; below it %s is cheaper\n", v.Value, money(v.Cost), currency, cheaper)
		}
		if len(b.Values) == 0 {
			_, err = fmt.Fprintf(w, "  none between %v and %v\n", b.From, b.To)
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// money has two decimals; what never ships has no cost.
func money(m volume.Money) string {
	if math.IsInf(float64(m), 0) || math.IsNaN(float64(m)) {
		return "unbounded"
	}
	return fmt.Sprintf("%.2f", float64(m))
}

// units groups the thousands of a quantity by thin blanks.
func units(v float64) string {
	text := fmt.Sprintf("%.0f", v)
	var groups []string
	for len(text) > 3 {
		groups = append([]string{text[len(text)-3:]}, groups...)
		text = text[:len(text)-3]
	}
	return strings.Join(append([]string{text}, groups...), " ")
}
