package logarithm

import (
	"context"
	"math"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

func run(t *testing.T, s Settings, counts ...float32) []float32 {
	t.Helper()
	p := raster.NewPlane(len(counts), 1)
	copy(p.Pix, counts)
	item := &pipeline.Item{View: "top"}
	item.SetPlane(pipeline.CorrectedPlane, "DN", p)
	st, _, err := Factory.New(func(dst any) error { *dst.(*Settings) = s; return nil }, pipeline.Environment{})
	if err != nil {
		t.Fatal(err)
	}
	if err := st.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	out, err := item.Plane(pipeline.CorrectedPlane)
	if err != nil {
		t.Fatal(err)
	}
	if p.Pix[0] != counts[0] {
		t.Error("the counts that came in were changed")
	}
	return out.Pix
}

// ln(1 + 198/2) = ln 100 = 4.605170; ln 2 = 0.693147; ln(1 + 7/2) = 1.504077 (tables of
// logarithms). What is no number stays none, so that it is seen.
func TestLogarithmOfCounts(t *testing.T) {
	got := run(t, Default, 198, 2, 0, -7, float32(math.NaN()))
	if !math.IsNaN(float64(got[4])) {
		t.Errorf("no number became %g", got[4])
	}
	for i, want := range []float64{200 * 4.605170, 200 * 0.693147, 0, -200 * 1.504077} {
		if math.Abs(float64(got[i])-want) > 1e-3 {
			t.Errorf("value %d: got %g, want %g", i, got[i], want)
		}
	}
}

// A mark that takes 30 % of the light away has the same height at a tenth of the exposure,
// but for the offset: 200·ln(1/0.7) = 71.3.
func TestContrastDoesNotDependOnExposure(t *testing.T) {
	s := Settings{ScaleDN: 200, OffsetDN: 0.1}
	got := run(t, s, 2000, 0.7*2000, 200, 0.7*200)
	for i := 0; i < 4; i += 2 {
		if height := float64(got[i] - got[i+1]); math.Abs(height-71.33) > 0.05 {
			t.Errorf("height %g, want 71.33", height)
		}
	}
}

func TestWithoutCorrectedPlane(t *testing.T) {
	if err := (stage{Default}).Run(context.Background(), &pipeline.Item{View: "top"}); err == nil {
		t.Error("got no error without a corrected plane")
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, s := range map[string]Settings{"scale_dn": {ScaleDN: math.NaN(), OffsetDN: 1}, "offset_dn": {ScaleDN: 1}} {
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": got ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
}
