package report

import (
	"bytes"
	"encoding/base64"
	"image/png"
	"math"
	"regexp"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/calibrate/dots"
	"lapgate/pipeline/calibrate/emva"
	"lapgate/pipeline/raster"
)

// madeFull is a calibration of the linear model K = 0.25 DN/e⁻, σ_d = 8 e⁻, η = 0.6, dark
// 20 DN, with all that a page can show.
func madeFull(t *testing.T) calibrate.Made {
	t.Helper()
	var ramp calibrate.Ramp
	for _, photons := range []float64{0, 800, 1600, 2400, 3200, 4000, 5200, 1003 / 0.15} {
		ramp.Points = append(ramp.Points, emva.Point{ExposureUS: 10 + photons, Photons: photons,
			Dark: emva.Level{MeanDN: 20, VarianceDN2: 49. / 12}, Bright: emva.Level{MeanDN: 20 + 0.15*photons, VarianceDN2: 49./12 + 0.0375*photons}})
	}
	ramp.Points = append(ramp.Points, emva.Point{ExposureUS: 8000, Photons: 8000, Dark: ramp.Points[0].Dark, Bright: emva.Level{MeanDN: 1023}})
	var err error
	if ramp.Figures, err = emva.Evaluate(ramp.Points); err != nil {
		t.Fatal(err)
	}
	ramp.HalfStep = 4
	ramp.Dark, ramp.Bright = emva.Spatial{MeanDN: 20, VarianceDN2: 1}, emva.Spatial{MeanDN: 500, VarianceDN2: 1 + 4.8*4.8}
	response := raster.NewPlane(64, 48)
	for i := range response.Pix {
		response.Pix[i] = 0.9 + 0.2*float32(i%64)/63
	}
	c := &pipeline.Calibration{Camera: "cam-1", Light: "ring", Mode: "m", Hash: "sha256:abc", MadeAt: "2024-01-02T03:04:05Z",
		Capture: pipeline.Capture{Format: raster.Mono10, Width: 64, Height: 48, ExposureUS: 1000}, Dark: raster.NewPlane(64, 48), Response: response,
		BadPixels: []pipeline.PixelAt{{X: 3, Y: 4}}, Noise: pipeline.NoiseModel{GainDNPerE: 0.25, DarkDN: 2.020726},
		Scale:      pipeline.Scale{UMPerPx: 12.5, UncertaintyUM: 0.003, Source: "dot target T-1, certificate of 2024-01-01"},
		Distortion: &pipeline.Distortion{K1: -0.02, CentreX: 32, CentreY: 24, NormPx: 40},
		Sizing:     &pipeline.Sizing{Exponent: 1.4, FluxDNPx: 500, ReferenceUM: 20, MinUM: 10, MaxUM: 40, Residual: 0.08, BlurWidthPx: 2.5, Dots: 3},
		Sensor:     &pipeline.SensorTemperature{MeanC: 31, LowC: 27, HighC: 35, Frames: 9}}
	p := calibrate.Provenance{Frames: []calibrate.SourceFrame{{Kind: "dark", File: "d<1>.pgm", SHA256: strings.Repeat("a", 64), CRC32C: "00000001"}}, GainLevels: 6, Ramp: &ramp,
		DarkPattern: &emva.Spatial{Frames: 4, MeanDN: 20, VarianceDN2: -0.1}, ResponsePattern: &emva.Spatial{Frames: 4, MeanDN: 500, VarianceDN2: 25},
		Target: &dots.Scale{Certificate: dots.Certificate{Serial: "T-1", Date: "2024-01-01", PitchUM: 500, UncertaintyUM: 0.1}, UMPerPx: 12.5, Dots: 2, Frames: 1, FieldShare: 0.4,
			Residuals: []dots.Residual{{X: 10, Y: 10, DX: 0.01}, {X: 50, Y: 40, DY: -0.02}}},
		SizingDots: []dots.Known{{DiameterUM: 10, FluxDNPx: 190}, {DiameterUM: 20, FluxDNPx: 500}, {DiameterUM: 40, FluxDNPx: 1320}}}
	return calibrate.Made{Calibration: c, Provenance: p}
}

func page(t *testing.T, m calibrate.Made) string {
	t.Helper()
	var out bytes.Buffer
	if err := WriteCalibration(&out, m); err != nil {
		t.Fatal(err)
	}
	return out.String()
}

// The page carries the model's figures (EMVA Standard 1288) with their units, the cautions, and what this
// calibration lacks.
func TestCalibrationPageHoldsItsFigures(t *testing.T) {
	text := page(t, madeFull(t))
	for _, want := range []string{"0.25 ± ", "DN/e⁻", "60.0", "4012", "63.3 = 36.03 dB", "467.4 = 53.39 dB", "14.30", "lost in the noise", "1.00", "4.00",
		"12.50000 ± 0.003", "T-1", "1.400 ± ", "not a calibration certificate", "IEC 62471", "not a safety device", "cover 40 % of the field", "changed by 8.0 K",
		"No reference patch", "d&lt;1&gt;.pgm", "K = 0.25 DN/e⁻", "<svg", "data:image/png;base64,"} {
		if !strings.Contains(text, want) {
			t.Errorf("the page does not say %q", want)
		}
	}
	if strings.Contains(text, "NaN") || strings.Contains(text, "http://") && !strings.Contains(text, `xmlns="http://www.w3.org`) {
		t.Error("the page holds what is no number, or reaches outside")
	}
	if n := strings.Count(text, "<svg"); n != 4 {
		t.Errorf("%d plots, want photon transfer, linearity, residuals and sizing", n)
	}
}

func TestCalibrationPageOfDarkFramesAlone(t *testing.T) {
	m := calibrate.Made{Calibration: &pipeline.Calibration{Camera: "c", Capture: pipeline.Capture{Format: raster.Mono8, Width: 8, Height: 8}, Dark: raster.NewPlane(8, 8), Scale: pipeline.Scale{UMPerPx: 5, Source: "stated"}}}
	text := page(t, m)
	if !strings.Contains(text, "system gain, and with it noise in electrons, is unknown") || strings.Contains(text, "<svg") || strings.Contains(text, "DSNU") {
		t.Error("a page without light shows figures that need it")
	}
}

// The gain map is drawn from dark to bright as the response rises.
func TestGainMapIsDrawn(t *testing.T) {
	text := page(t, madeFull(t))
	data := regexp.MustCompile(`src="data:image/png;base64,([^"]+)" alt="Gain map"`).FindStringSubmatch(text)
	if data == nil {
		t.Fatal("no gain map")
	}
	raw, err := base64.StdEncoding.DecodeString(strings.NewReplacer("&#43;", "+", "%2b", "+").Replace(data[1]))
	if err != nil {
		t.Fatal(err)
	}
	img, err := png.Decode(bytes.NewReader(raw))
	if err != nil {
		t.Fatal(err)
	}
	left, _, _, _ := img.At(0, 20).RGBA()
	right, _, _, _ := img.At(63, 20).RGBA()
	if left>>8 > 5 || right>>8 < 250 || img.Bounds().Dx() != 64 {
		t.Errorf("left %d, right %d of 255", left>>8, right>>8)
	}
}

func TestRoundTicksAreRound(t *testing.T) {
	for _, r := range [][2]float64{{0, 1}, {0, 1.5}, {-0.37, 0.42}, {0, 4093}, {12, 13.1}, {0, 1e6}} {
		ticks := roundTicks{}.Ticks(r[0], r[1])
		if len(ticks) < 3 || len(ticks) > 11 {
			t.Errorf("%v: %d ticks", r, len(ticks))
		}
		step := ticks[1].Value - ticks[0].Value
		first := step / math.Pow(10, math.Floor(math.Log10(step)+1e-9))
		if k := math.Round(first); math.Abs(first-k) > 1e-6 || k != 1 && k != 2 && k != 5 {
			t.Errorf("%v: step %v", r, step)
		}
	}
}
