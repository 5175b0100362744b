package yield

import (
	"math"
	"testing"
)

// 200 units: 180 accepted at once, 8 rejected, 12 held; of the holds a person released 7, rejected 1, and 4 are open.
func TestSummarize(t *testing.T) {
	counts := Counts{First: Tally{180, 8, 12}, Final: Tally{187, 9, 4}}
	s := must[Summary](t)(Summarize(counts, 0.95))
	if s.Units != 200 || s.Confidence != 0.95 || s.Final.Open != 4 {
		t.Errorf("got %+v", s)
	}
	near(t, "first pass", s.FirstPass.Value, 0.90, 1e-12)
	near(t, "held at first", s.FirstHold.Value, 0.06, 1e-12)
	near(t, "final, holds fail", s.Final.Low.Value, 187.0/200, 1e-12)
	near(t, "final, holds pass", s.Final.High.Value, 191.0/200, 1e-12)
	low := must[Interval](t)(ClopperPearson(187, 200, 0.95))
	high := must[Interval](t)(ClopperPearson(191, 200, 0.95))
	if s.Final.Envelope != (Interval{low.Low, high.High}) {
		t.Errorf("envelope %v", s.Final.Envelope)
	}
	if s.FirstPass.ClopperPearson != must[Interval](t)(ClopperPearson(180, 200, 0.95)) || s.FirstPass.Wilson != must[Interval](t)(Wilson(180, 200, 0.95)) {
		t.Errorf("intervals of the first pass: %+v", s.FirstPass)
	}
}

func TestSummarizeWithoutHolds(t *testing.T) {
	s := must[Summary](t)(Summarize(Counts{First: Tally{Accepted: 3}, Final: Tally{Accepted: 3}}, 0.9))
	if s.Final.Low != s.Final.High || s.Final.Envelope != s.Final.Low.ClopperPearson {
		t.Errorf("no open hold, but bounds differ: %+v", s.Final)
	}
}

func TestSummarizeNothing(t *testing.T) {
	s := must[Summary](t)(Summarize(Counts{}, 0.95))
	if !math.IsNaN(s.FirstPass.Value) || s.Final.Envelope != (Interval{0, 1}) {
		t.Errorf("got %+v", s)
	}
}

func TestSummarizeRefuses(t *testing.T) {
	for name, counts := range map[string]Counts{
		"different units":  {First: Tally{1, 0, 0}, Final: Tally{1, 1, 0}},
		"negative verdict": {First: Tally{2, -1, 0}, Final: Tally{1, 0, 0}},
		"negative word":    {First: Tally{1, 0, 0}, Final: Tally{2, 0, -1}},
	} {
		_, err := Summarize(counts, 0.95)
		wantError(t, name, err)
	}
	_, err := Summarize(Counts{}, 1.5)
	wantError(t, "confidence", err)
}

func TestTallyPlus(t *testing.T) {
	if got := (Tally{1, 2, 3}).Plus(Tally{10, 20, 30}); got != (Tally{11, 22, 33}) || got.Units() != 66 {
		t.Errorf("got %v", got)
	}
}

// Worked example common in six-sigma teaching: four steps; -ln(rolled) is the total of defects per unit.
func TestRolledThroughput(t *testing.T) {
	rolled := must[float64](t)(RolledThroughput([]float64{.98, .95, .99, .97}))
	near(t, "rolled", rolled, 0.8940393, 5e-8)
	near(t, "normalized", must[float64](t)(NormalizedYield(rolled, 4)), 0.972387, 5e-7)
	near(t, "defects per unit", must[float64](t)(TotalDefectsPerUnit(rolled)), 0.112006, 5e-7)
	near(t, "perfect", must[float64](t)(TotalDefectsPerUnit(1)), 0, 0)
}

func TestRolledInterval(t *testing.T) {
	one := must[Interval](t)(RolledInterval([]Step{{47, 50}}, 0.95))
	if one != must[Interval](t)(ClopperPearson(47, 50, 0.95)) {
		t.Errorf("one step: %v", one)
	}
	two := must[Interval](t)(RolledInterval([]Step{{47, 50}, {190, 200}}, 0.95))
	a, b := must[Interval](t)(ClopperPearson(47, 50, 0.975)), must[Interval](t)(ClopperPearson(190, 200, 0.975))
	nearInterval(t, "two steps", two, a.Low*b.Low, a.High*b.High, 1e-12)
}

func TestDefectsPerUnit(t *testing.T) {
	rate := must[DefectRate](t)(DefectsPerUnit(10, 40, 0.95))
	near(t, "per unit", rate.PerUnit, 0.25, 1e-12)
	nearInterval(t, "Garwood", rate.Interval, 4.795389/40, 18.390356/40, 1e-7)
	none := must[DefectRate](t)(DefectsPerUnit(0, 0, 0.95))
	if !math.IsNaN(none.PerUnit) || !math.IsInf(none.Interval.High, 1) {
		t.Errorf("no units: %+v", none)
	}
}

func TestRolledRefuses(t *testing.T) {
	_, err := RolledThroughput(nil)
	wantError(t, "no steps", err)
	_, err = RolledThroughput([]float64{0.9, 1.1})
	wantError(t, "110 %", err)
	_, err = NormalizedYield(0.9, 0)
	wantError(t, "0 steps", err)
	_, err = TotalDefectsPerUnit(math.NaN())
	wantError(t, "NaN", err)
	_, err = RolledInterval(nil, 0.95)
	wantError(t, "no steps", err)
	_, err = RolledInterval([]Step{{2, 1}}, 0.95)
	wantError(t, "2 of 1", err)
	_, err = DefectsPerUnit(1, 0, 0.95)
	wantError(t, "defects without units", err)
}
