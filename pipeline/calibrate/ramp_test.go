package calibrate

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
)

// rampFolder writes a ramp of the synthetic camera; change may spoil a line of ramp.csv.
func rampFolder(t *testing.T, change func(i int, line string) string) string {
	t.Helper()
	dir := t.TempDir()
	c := newCamera(200, 200)
	c.format = raster.Mono10
	lines := "exposure_us,photons_per_pixel,bright_a,bright_b,dark_a,dark_b\n"
	for i, photons := range []float64{0, 800, 1600, 2600, 3600, 4600, 6300, 7500} {
		names := make([]string, 4)
		for k := range names {
			light := photons
			if k > 1 {
				light = 0
			}
			names[k] = fmt.Sprintf("%d%c.pgm", i, 'a'+k)
			if err := files.Write(filepath.Join(dir, names[k]), c.frame(names[k], c.counts(flat(light))).Raw); err != nil {
				t.Fatal(err)
			}
		}
		line := fmt.Sprintf("%g,%g,%s", 10+photons, photons, strings.Join(names, ","))
		if change != nil {
			line = change(i, line)
		}
		lines += line + "\n"
	}
	if err := os.WriteFile(filepath.Join(dir, "ramp.csv"), []byte(lines), 0o600); err != nil {
		t.Fatal(err)
	}
	return dir
}

// 40 000 pixels a pair tell K to about 1 %.
func TestRampFromAFolder(t *testing.T) {
	steps, err := RampFolder(rampFolder(t, nil), stated, files.Options{})
	if err != nil {
		t.Fatal(err)
	}
	r, used, err := MeasureRamp(steps, nil)
	if err != nil {
		t.Fatal(err)
	}
	f := r.Figures
	if math.Abs(f.GainDNPerE/0.25-1) > 0.03 || math.Abs(f.Efficiency/0.6-1) > 0.03 || math.Abs(f.SaturationE/3780-1) > 0.01 || !f.SaturationReached {
		t.Errorf("%+v", f)
	}
	if len(used) != 32 || used[0].Kind != "ramp" || r.Points[r.HalfStep].Photons != 3600 {
		t.Errorf("%d frames used, half at %v photons", len(used), r.Points[r.HalfStep].Photons)
	}
}

func TestRampGivesTheGain(t *testing.T) {
	c := newCamera(200, 200)
	c.format = raster.Mono10
	steps, err := RampFolder(rampFolder(t, nil), stated, files.Options{})
	if err != nil {
		t.Fatal(err)
	}
	m, err := Make(request(), Inputs{Dark: Frames(c.take("dark", 2, flat(0))...), Ramp: steps})
	if err != nil || m.Calibration.Noise.GainDNPerE != m.Provenance.Ramp.Figures.GainDNPerE || m.Provenance.GainLevels != m.Provenance.Ramp.Figures.Levels {
		t.Errorf("%+v, %v", m.Calibration, err)
	}
}

func TestRampsThatCannotServeAreRefused(t *testing.T) {
	for name, c := range map[string]struct {
		change func(i int, line string) string
		want   string
	}{
		"copied frame": {func(i int, l string) string { return strings.Replace(l, "3b.pgm", "3a.pgm", 1) }, "a copied frame has no noise"},
		"falling": {func(i int, l string) string {
			return strings.Replace(strings.Replace(l, "3610,3600", "5,5", 1), "x", "y", 1)
		}, "want rising steps"},
		"no number": {func(i int, l string) string { return strings.Replace(l, "810,", "long,", 1) }, `line 3: exposure_us: got "long"`},
		"no file":   {func(i int, l string) string { return strings.Replace(l, "2d.pgm", "lost.pgm", 1) }, "lost.pgm"},
	} {
		steps, err := RampFolder(rampFolder(t, c.change), stated, files.Options{})
		if err == nil {
			_, _, err = MeasureRamp(steps, nil)
		}
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: got %v, want ...%s...", name, err, c.want)
		}
	}
	other := stated
	other.GainDB = 12
	steps, err := RampFolder(rampFolder(t, nil), other, files.Options{})
	if err != nil {
		t.Fatal(err)
	}
	c := newCamera(200, 200)
	c.format = raster.Mono10
	_, err = Make(request(), Inputs{Dark: Frames(c.take("dark", 2, flat(0))...), Ramp: steps})
	if pipeline.KindOf(err) != pipeline.InvalidKind || !strings.Contains(err.Error(), "gain_db: got 12, want 6") {
		t.Errorf("other gain: got %v", err)
	}
}
