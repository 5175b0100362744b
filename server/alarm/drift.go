package alarm

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"
	"sync"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
	"lapgate/server/yield"
)

// Drift is where one reading of a view stands, and where it is going.
type Drift struct {
	Line, Station, View string
	Latest              pipeline.Proof
	Unit                string // of the latest
	At                  time.Time
	Units               int     // looked at
	PerHour             float64 // change in an hour; 0 where it may be chance
	State               string  // steady, warning or hold
	Text                string  // why it is not steady
}

const (
	latestUnits     = 64 // a drift within these is seen soon
	sampledUnits    = 200
	sampledTime     = 7 * 24 * time.Hour
	fewestUnits     = 12
	driftConfidence = 0.95           // of the slope being none by chance
	driftAhead      = 24 * time.Hour // warn when the hold is met so soon, and within the time looked at
)

// driftCache keeps answers for a while.
type driftCache struct {
	mu   sync.Mutex // guards seen
	seen map[place]driftAnswer
}

type driftAnswer struct {
	at   time.Time
	list []Drift
}

// Drifts returns how each reading of a station's views stands, by view and name. Only units
// of the latest one's part and calibration, since the last change of lamp, lens or
// camera, are looked at.
func (w *Watch) Drifts(ctx context.Context, line, station string) ([]Drift, error) {
	if w == nil {
		return nil, nil
	}
	w.drifts.mu.Lock()
	defer w.drifts.mu.Unlock()
	if a, ok := w.drifts.seen[place{line, station}]; ok && w.Now().Sub(a.at) < w.Settings.DriftEvery {
		return a.list, nil
	}
	list, err := w.history(ctx, line, station)
	if err != nil || len(list) == 0 {
		return nil, err
	}
	out := driftsOf(list)
	for i := range out {
		out[i].Line, out[i].Station = line, station
	}
	if w.drifts.seen == nil {
		w.drifts.seen = map[place]driftAnswer{}
	}
	if len(w.drifts.seen) < mostStations {
		w.drifts.seen[place{line, station}] = driftAnswer{w.Now(), out}
	}
	return out, nil
}

// history returns the latest units and a sample of those before, oldest first.
func (w *Watch) history(ctx context.Context, line, station string) ([]ledger.Inspection, error) {
	since := w.Now().Add(-sampledTime)
	change, err := w.Ledger.LastChange(ctx, line, station)
	if err == nil && change.At.After(since) {
		since = change.At
	} else if err != nil && pipeline.KindOf(err) != pipeline.NotFoundKind {
		return nil, err
	}
	latest, err := w.Ledger.Latest(ctx, line, station, latestUnits)
	if err != nil {
		return nil, err
	}
	sample, err := w.Ledger.Sample(ctx, line, station, since, sampledUnits)
	if err != nil {
		return nil, err
	}
	for _, in := range latest {
		if in.Judged.After(since) && !slices.ContainsFunc(sample, func(s ledger.Inspection) bool { return s.ID == in.ID }) {
			sample = append(sample, in)
		}
	}
	slices.SortStableFunc(sample, func(a, b ledger.Inspection) int { return a.Judged.Compare(b.Judged) })
	return sample, nil
}

// series is one reading of a view over time.
type series struct {
	view, name string
	proofs     []pipeline.Proof
	units      []string
	times      []time.Time
}

func driftsOf(list []ledger.Inspection) []Drift {
	newest := list[len(list)-1]
	var out []Drift
	for _, v := range newest.Evidence.Views {
		for _, p := range v.Proofs {
			if p.WarnHigh > 0 {
				out = append(out, seriesOf(list, newest, v, p.Name).drift())
			}
		}
	}
	slices.SortStableFunc(out, func(a, b Drift) int {
		return cmp.Or(cmp.Compare(a.View, b.View), cmp.Compare(a.Latest.Name, b.Latest.Name))
	})
	return out
}

func seriesOf(list []ledger.Inspection, newest ledger.Inspection, like pipeline.ViewEvidence, name string) series {
	s := series{view: like.Name, name: name}
	for _, in := range list {
		if in.Part != newest.Part || in.Surface != newest.Surface {
			continue
		}
		for _, v := range in.Evidence.Views {
			if v.Name != like.Name || v.Calibration != like.Calibration {
				continue
			}
			for _, p := range v.Proofs {
				if p.Name == name && p.WarnHigh > 0 {
					s.proofs, s.units, s.times = append(s.proofs, p), append(s.units, in.Unit), append(s.times, in.Judged)
				}
			}
		}
	}
	return s
}

func (s series) drift() Drift {
	n := len(s.proofs)
	d := Drift{View: s.view, Latest: s.proofs[n-1], Unit: s.units[n-1], At: s.times[n-1], Units: n}
	d.State = d.Latest.State()
	d.Text = d.Latest.Reason + d.Latest.Warning
	for _, units := range []int{latestUnits, n} {
		text, perHour := s.tail(units).approach()
		if d.PerHour == 0 {
			d.PerHour = perHour
		}
		if text != "" && d.State == "steady" {
			d.State, d.Text = "warning", text
		}
	}
	return d
}

// tail is the latest units of a series.
func (s series) tail(n int) series {
	from := max(len(s.proofs)-n, 0)
	s.proofs, s.units, s.times = s.proofs[from:], s.units[from:], s.times[from:]
	return s
}

// approach says when the line through the series meets the bound of a hold, if it soon
// does; perHour is its slope, 0 where that may be chance.
func (s series) approach() (text string, perHour float64) {
	n := len(s.proofs)
	if n < fewestUnits {
		return "", 0
	}
	newest, at := s.proofs[n-1], s.times[n-1]
	var times, values []float64
	for i, p := range s.proofs {
		times, values = append(times, s.times[i].Sub(at).Hours()), append(values, p.Value)
	}
	ahead := min(-times[0], driftAhead.Hours())
	a, ok, err := yield.FindApproach(times, values, &newest.Low, &newest.High, ahead, driftConfidence)
	if err != nil { // all of one moment
		return "", 0
	}
	if a.Moves(driftConfidence) {
		perHour = a.Slope
	}
	if !ok {
		return "", perHour
	}
	when := at.Add(time.Duration(math.Round(a.At * float64(time.Hour))))
	return fmt.Sprintf("%s of view %s went from %.4g to %.4g of what was calibrated over %d units; at this pace it meets the hold at %.4g on %s",
		s.name, s.view, a.Trend.At(times[0]), a.Trend.At(0), n, a.Bound, when.UTC().Format("2006-01-02 15:04 MST")), perHour
}
