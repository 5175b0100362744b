package plan

import (
	"errors"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"github.com/goccy/go-yaml"
)

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.9g, want %.9g within %g", what, got, want, tolerance)
	}
}

func decode[T any](t *testing.T, file string) *T {
	t.Helper()
	text, err := os.ReadFile(filepath.Join("testdata", file))
	if err != nil {
		t.Fatal(err)
	}
	var v T
	if err := yaml.NewDecoder(strings.NewReader(string(text)), yaml.Strict()).Decode(&v); err != nil {
		t.Fatalf("%s: %v", file, err)
	}
	return &v
}

func good(t *testing.T) *Plan {
	t.Helper()
	p := decode[Plan](t, "good.yaml")
	if err := p.Validate(); err != nil {
		t.Fatal(err)
	}
	return p
}

func TestGoodPlanReads(t *testing.T) {
	p := good(t)
	if len(p.Processes) != 2 || p.Processes[1].Learning.Convention != "wright" || p.Processes[0].Yield.Ledger.Gate != "ring" {
		t.Errorf("%+v", p)
	}
	if p.Processes[0].Of("cost_per_start") != "a quotation" || p.Processes[0].Of("setup_cost") != "invented" {
		t.Error("sources by key are lost")
	}
}

// Each mistake names its place and what is allowed.
func TestPlansWithMistakes(t *testing.T) {
	for _, c := range []struct {
		mistake      func(p *Plan)
		path, allows string
	}{
		{func(p *Plan) { p.Currency = "" }, "currency", "EUR"},
		{func(p *Plan) { p.Format = 2 }, "format", "allowed: 1"},
		{func(p *Plan) { p.Processes[0].ToolingLifeStarts = -5 }, "processes[0].tooling_life_starts", "0 or more"},
		{func(p *Plan) { v := 1.2; p.Processes[1].Yield = Yield{Value: &v} }, "processes[1].yield.value", "0 to 1"},
		{func(p *Plan) { p.Processes[0].Yield.Ledger.Gate = "no" }, "processes[0].yield.ledger.gate", "inspection option"},
		{func(p *Plan) { p.Processes[0].Yield.Ledger.From = "May" }, "processes[0].yield.ledger.from", "allowed: a time"},
		{func(p *Plan) { p.Processes[1].Learning.Convention = "log" }, "processes[1].learning.convention", "crawford, wright"},
		{func(p *Plan) { p.Processes[0].CostPerStart[1].FromStarts = 1 }, "processes[0].cost_per_start[1].from_starts", "must rise"},
		{func(p *Plan) { p.Processes[1].Name = "turned" }, "processes[1].name", "taken"},
		{func(p *Plan) { p.Reworks[0].Then = "repolish" }, "reworks[0].then", "comes back to itself"},
		{func(p *Plan) { p.Reworks[0].Then = "polish" }, "reworks[0].then", "scrap or the name"},
		{func(p *Plan) { p.Inspections[1].Rework = "x" }, "inspections[1].rework", "scrap or the name"},
		{func(p *Plan) { p.Inspections[1].Kind = "all" }, "inspections[1].kind", "twice_either"},
		{func(p *Plan) { p.Inspections[1].Station.LifeYears = 0 }, "inspections[1].station.life_years", "above 0"},
		{func(p *Plan) { p.Inspections[1].Miss.Count.K = 99 }, "inspections[1].miss.count", "0 to 60"},
		{func(p *Plan) { p.Inspections[2].Study.DefectSizes[0].Share = .9 }, "inspections[2].study.defect_sizes", "add up to 1"},
		{func(p *Plan) { p.Inspections[3].ISO2859.AQLPercent = 1.2 }, "inspections[3].iso_2859_1.aql_percent", "0.65 1 1.5"},
		{func(p *Plan) { p.Inspections[4].SameResultShare = nil }, "inspections[4].same_result_share", "missing"},
		{func(p *Plan) { p.Quantities.Points, p.Uncertainty.Draws = 1000, 1_000_000 }, "uncertainty.draws", "combinations x quantities"},
		{func(p *Plan) { p.Inspections[3].SameErrorsAs = "ring" }, "inspections[3].same_errors_as", "exactly one"},
		{func(p *Plan) { p.Inspections[3].SameErrorsAs = "eye" }, "inspections[3].same_errors_as", "name an inspection option"},
		{func(p *Plan) { p.Uncertainty.Draws = 3 }, "uncertainty.draws", "100 to"},
	} {
		p := good(t)
		c.mistake(p)
		problems := Problems(p.Validate())
		found := false
		for _, problem := range problems {
			found = found || (problem.Path == c.path && strings.Contains(problem.Message, c.allows))
		}
		if !found || len(problems) > 2 {
			t.Errorf("want %s ... %s; got %v", c.path, c.allows, problems)
		}
	}
}

func TestLongerReworkCycle(t *testing.T) {
	p := good(t)
	v := 0.5
	p.Reworks = []Rework{{Name: "a", Then: "b", Success: Share{Value: &v}}, {Name: "b", Then: "a", Success: Share{Value: &v}}}
	p.Inspections[1].Rework = "a"
	if got := len(Problems(p.Validate())); got != 2 {
		t.Errorf("%d problems, want one per route: %v", got, p.Validate())
	}
}

// Source: Rogan and Gladen 1978; 8 of 200 rejected at sensitivity 57/60 and
// specificity 297/300 gives (.04-.01)/(.95-.01).
func TestRoganGladen(t *testing.T) {
	got, err := RoganGladen(.04, .01, .05)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "corrected", got, .03/.94, 1e-12)
	if got, _ = RoganGladen(.001, .01, .05); got != 0 {
		t.Error("a share below the false rejects is not held at zero")
	}
	if _, err := RoganGladen(.5, .5, .5); err == nil {
		t.Error("a gate that tells nothing was accepted")
	}
}

func resolved(t *testing.T) *Plan {
	t.Helper()
	p := good(t)
	if err := p.ResolveStudies(func(file string) (*Study, error) { return decode[Study](t, file), nil }); err != nil {
		t.Fatal(err)
	}
	err := p.ResolveLedger(func(f LedgerFilter) (Counts, error) {
		if f.Process != "turned" {
			t.Errorf("asked for %+v", f)
		}
		return Counts{Started: 206, Accepted: 192, Rejected: 8, Held: 6}, nil
	})
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// The ledger's yield is corrected by the gate of the same world, and holds are
// left out.
func TestLedgerYieldIsCorrected(t *testing.T) {
	p := good(t)
	if _, err := Know(p); err == nil {
		t.Error("an unresolved plan was accepted")
	}
	k, err := Know(resolved(t))
	if err != nil {
		t.Fatal(err)
	}
	w := k.World(k.Values())
	near(t, "yield", w.Yield[0], 1-(8./200-3./300)/(57./60-3./300), 1e-12)
	near(t, "not measured behind a gate", w.Yield[1], .9, 1e-12)
	values := k.Values()
	values[k.YieldIndex(0)] = 1
	if w = k.World(values); !w.Clipped || w.Yield[0] != 1 {
		t.Error("a correction beyond 1 is not told")
	}
}

// Misses from a study are weighted by the sizes of production.
func TestStudyIsWeightedByProduction(t *testing.T) {
	k, err := Know(resolved(t))
	if err != nil {
		t.Fatal(err)
	}
	for i, name := range k.Names {
		switch name {
		case "inspections.studied.miss":
			near(t, "miss", k.Beliefs[i].Value(), .25*(1-30./40)+.75*(1-58./60), 1e-12)
			checkMoments(t, k.Beliefs[i])
		case "inspections.studied.false_reject":
			near(t, "false reject", k.Beliefs[i].Value(), 2./250, 1e-12)
		}
	}
}

// checkMoments holds mean, variance and quantiles against draws.
func checkMoments(t *testing.T, b Belief) {
	t.Helper()
	src, n := rand.NewPCG(1, 2), 40000
	mean, variance := b.Moments()
	low, high := b.Interval(.9)
	sum, squares, inside := 0.0, 0.0, 0.0
	for range n {
		v := b.Draw(src)
		sum, squares = sum+v, squares+v*v
		if low <= v && v <= high {
			inside++
		}
	}
	m := sum / float64(n)
	near(t, "mean", m, mean, 4*math.Sqrt(variance/float64(n)))
	near(t, "variance", (squares/float64(n)-m*m)/variance, 1, .04)
	near(t, "inside", inside/float64(n), .9, .01)
}

func TestStudyWithMistakes(t *testing.T) {
	s := decode[Study](t, "study.yaml")
	s.Sensitivity[0].Found = 99
	if err := s.Validate(); err == nil || !strings.Contains(err.Error(), "sensitivity[0]") {
		t.Errorf("got %v", err)
	}
	p := good(t)
	err := p.ResolveStudies(func(string) (*Study, error) { return nil, errors.New("no such file") })
	if ps := Problems(err); len(ps) != 1 || ps[0].Path != "inspections[2].study.file" {
		t.Errorf("got %v", err)
	}
	p.Inspections[2].Study.DefectSizes[0].SizeUm = 11
	err = p.ResolveStudies(func(file string) (*Study, error) { return decode[Study](t, file), nil })
	if err == nil || !strings.Contains(err.Error(), "no size 11") {
		t.Errorf("got %v", err)
	}
}

func TestLedgerWithoutUnitsIsRefused(t *testing.T) {
	err := good(t).ResolveLedger(func(LedgerFilter) (Counts, error) { return Counts{Held: 3}, nil })
	if ps := Problems(err); len(ps) != 1 || !strings.Contains(ps[0].Message, "no unit was accepted or rejected") {
		t.Errorf("got %v", err)
	}
}

func TestAssumptionsNameEveryFigureAndItsSource(t *testing.T) {
	all := map[string]Assumption{}
	for _, a := range resolved(t).Assumptions() {
		all[a.Path] = a
	}
	for path, want := range map[string]Assumption{
		"processes.turned.cost_per_start[1]":        {Value: "80 from 500 starts", Source: "a quotation"},
		"processes.turned.yield.ledger":             {Value: "ledger: process=turned line=A, corrected for the gate ring", Source: "the ledger"},
		"inspections.ring.miss.count":               {Value: "3 of 60", Source: "a study with known units"},
		"inspections.lots.iso_2859_1.lot_size":      {Value: "500", Source: "invented"},
		"outcomes.returns.cost":                     {Value: "45", Source: "accounts"},
		"working_time.labour_cost_per_hour":         {Value: "41", Source: ""},
		"inspections.ring.station.cycle_time_s":     {Value: "9", Source: "invented"},
		"processes.replicated.learning.rate":        {Value: "0.9", Source: ""},
		"inspections.studied.study.defect_sizes[1]": {Value: "0.75 of 20 um", Source: "invented"},
	} {
		if got := all[path]; got.Value != want.Value || got.Source != want.Source {
			t.Errorf("%s: got %+v, want %+v", path, got, want)
		}
	}
}

func TestUnknownLeavesThePlanAlone(t *testing.T) {
	p := resolved(t)
	u, err := p.Unknown("processes.turned.yield")
	if err != nil {
		t.Fatal(err)
	}
	near(t, "now", u.Now, 1-(.04-.01)/(.95-.01), 1e-12)
	if changed := u.With(.5); *changed.Processes[0].Yield.Value != .5 || p.Processes[0].Yield.Value != nil {
		t.Error("the plan itself was changed")
	}
	price, err := p.Unknown("processes.turned.cost_per_start")
	if err != nil || price.With(3).Processes[0].CostPerStart[0].Cost != 3 || p.Processes[0].CostPerStart[0].Cost != 95 {
		t.Error("the plan's prices were changed")
	}
	if _, err := p.Unknown("inspections.none.miss"); err == nil {
		t.Error("an option without inspection has misses")
	}
}

// Options with the same camera share its errors, world by world.
func TestSameErrorsAreDrawnOnce(t *testing.T) {
	p := resolved(t)
	p.Inspections[3].SameErrorsAs, p.Inspections[3].FalseReject, p.Inspections[3].Miss = "ring", Share{}, Share{}
	if err := p.Validate(); err != nil {
		t.Fatal(err)
	}
	k, err := Know(p)
	if err != nil {
		t.Fatal(err)
	}
	values := k.Values()
	values[2], values[3] = .123, .234
	w := k.World(values)
	near(t, "false reject", w.FalseReject[3], .123, 0)
	near(t, "miss", w.Miss[3], .234, 0)
	near(t, "another", w.Miss[4], .05, 0)
}

// The guide names every key of the files.
func TestGuideNamesEveryKey(t *testing.T) {
	guide, err := os.ReadFile("FORMATS.md")
	if err != nil {
		t.Fatal(err)
	}
	var missing []string
	for _, v := range []any{Plan{}, Study{}, CountsFile{}} {
		for _, key := range keysOf(reflect.TypeOf(v)) {
			if !strings.Contains(string(guide), key) {
				missing = append(missing, key)
			}
		}
	}
	if missing != nil {
		t.Errorf("FORMATS.md lacks %v", missing)
	}
}

func keysOf(t reflect.Type) []string {
	for t.Kind() == reflect.Pointer || t.Kind() == reflect.Slice {
		t = t.Elem()
	}
	if t.Kind() != reflect.Struct {
		return nil
	}
	var keys []string
	for i := range t.NumField() {
		key, _, _ := strings.Cut(t.Field(i).Tag.Get("yaml"), ",")
		if key == "-" {
			continue
		}
		if key != "" {
			keys = append(keys, "`"+key+"`")
		}
		keys = append(keys, keysOf(t.Field(i).Type)...)
	}
	return keys
}
