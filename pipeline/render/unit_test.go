package render

import (
	"encoding/json"
	"math"
	"reflect"
	"slices"
	"testing"

	"lapgate/pipeline"
)

func digs(perUnit float64) Population {
	return Population{Kind: pipeline.Dig, PerUnit: perUnit, SizeUM: Distribution{Shape: ShapeLogUniform, Min: 200, Max: 900}, BrightnessDN: Distribution{Value: 200}}
}

// A new population leaves what the others draw as it was.
func TestNewPopulationMovesNothing(t *testing.T) {
	s := bare()
	s.Processes[0].Populations = []Population{digs(6)}
	before := newRenderer(t, s).Unit(3)
	scratches := Population{Kind: pipeline.Scratch, PerUnit: 4, SizeUM: Distribution{Value: 50}, LengthUM: Distribution{Value: 3000}, BrightnessDN: Distribution{Value: 90}}
	s.Processes[0].Populations = append(s.Processes[0].Populations, scratches)
	after := newRenderer(t, s).Unit(3)
	if len(before.Objects) == 0 || len(after.Objects) <= len(before.Objects) {
		t.Fatalf("got %d objects, then %d", len(before.Objects), len(after.Objects))
	}
	for i, o := range before.Objects {
		o.Isolated, after.Objects[i].Isolated = false, false
		if !reflect.DeepEqual(o, after.Objects[i]) {
			t.Errorf("object %d: got %+v, was %+v", i, after.Objects[i], o)
		}
	}
}

// Numbers on units are Poisson: mean and variance both 6, here within 4 standard errors.
// Places are even over the area: half of them within 1/√2 of the radius they can have.
func TestNumbersAndPlaces(t *testing.T) {
	s := bare()
	s.Processes[0].Populations = []Population{digs(6)}
	s.Part.Turned = true
	r := newRenderer(t, s)
	const units = 800
	sum, square, inner, total := 0.0, 0.0, 0.0, 0.0
	for i := range units {
		u := r.Unit(i)
		n := float64(len(u.Objects))
		sum, square = sum+n, square+n*n
		for _, o := range u.Objects {
			total++
			reach := math.Hypot(o.UUM, o.VUM) / (9000 - o.DiameterUM/2)
			if reach > 1 {
				t.Fatalf("dig at %g of the radius it may have", reach)
			}
			if reach < math.Sqrt2/2 {
				inner++
			}
			near(t, "turned back", math.Hypot(o.PartUUM, o.PartVUM), math.Hypot(o.UUM, o.VUM), 1e-6)
		}
	}
	mean := sum / units
	near(t, "mean", mean, 6, 4*math.Sqrt(6.0/units))
	near(t, "variance", square/units-mean*mean, 6, 4*math.Sqrt((6+2*36)/float64(units)))
	near(t, "inner half", inner/total, 0.5, 4*math.Sqrt(0.25/total))
}

func TestIsolated(t *testing.T) {
	part := Part{DiameterMM: 20, ClearApertureMM: 18}
	dig := func(u, v float64) Object { return Object{Kind: pipeline.Dig, UUM: u, VUM: v, DiameterUM: 400} }
	scratch := Object{Kind: pipeline.Scratch, UUM: 0, VUM: -5000, LengthUM: 6000, WidthUM: 100}
	// the gap is 16 px of 100 µm
	objects := []Object{dig(0, 0), dig(1900, 0), dig(0, 4500), dig(2900, -3500), dig(7500, 0), scratch}
	markIsolated(objects, part, 100)
	got := []bool{}
	for _, o := range objects {
		got = append(got, o.Isolated)
	}
	if want := []bool{false, false, true, false, false, false}; !slices.Equal(got, want) {
		t.Errorf("got %v, want %v", got, want)
	}
}

func TestLotsFollowShares(t *testing.T) {
	s := bare()
	s.Processes = []Process{{Name: "a", Share: 2}, {Name: "b", Share: 1}}
	count := map[string]int{}
	for lot := range 24 {
		count[s.Lines[lot%2].Name+s.processOfLot(lot).Name]++
	}
	if want := map[string]int{"Aa": 8, "Ab": 4, "Ba": 8, "Bb": 4}; !reflect.DeepEqual(count, want) {
		t.Errorf("got %v, want %v", count, want)
	}
}

func TestLimits(t *testing.T) {
	l := Limits{DigDiameterUM: 200, ScratchWidthUM: 60}
	broken, close := l.Compare(Worst{DigDiameterUM: 230, ScratchWidthUM: 50, StainDiameterUM: 1e6})
	if !slices.Equal(broken, []string{"dig_diameter_um"}) || close {
		t.Errorf("got %v, %v", broken, close)
	}
	if broken, close = l.Compare(Worst{ScratchWidthUM: 55}); len(broken) != 0 || !close {
		t.Errorf("got %v, %v", broken, close)
	}
}

func TestTruthAsJSON(t *testing.T) {
	s := bare()
	s.Processes[0].Populations = []Population{digs(6)}
	s.Limits.DigDiameterUM = 100
	r := newRenderer(t, s)
	_, truth, err := r.Shoot(r.Unit(0))
	if err != nil {
		t.Fatal(err)
	}
	text, err := json.Marshal(truth)
	if err != nil {
		t.Fatal(err)
	}
	var back Truth
	if err := json.Unmarshal(text, &back); err != nil {
		t.Fatal(err)
	}
	for i := range truth.Objects {
		truth.Objects[i].shape = 0 // not part of the file
	}
	if !reflect.DeepEqual(back, truth) {
		t.Errorf("got %+v, want %+v", back, truth)
	}
	if truth.Conforming || !slices.Equal(truth.Broken, []string{"dig_diameter_um"}) || truth.Unit != "T001" || len(truth.Objects[0].Sightings) != 3 {
		t.Errorf("got %s", text)
	}
}
