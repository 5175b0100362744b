package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/raster/files"
	"lapgate/pipeline/render"
)

// calibrationFolders renders dark, stray, response and dots of a small camera as files, with the
// camera's temperature beside one of them.
func calibrationFolders(t *testing.T) string {
	t.Helper()
	target := render.Target{Name: "dots", PitchUM: 1000, Columns: 9, Rows: 7, DiametersUM: []float64{350}, BackgroundDN: 40, BrightnessDN: 1500, Frames: 1}
	r, err := render.New(render.Scene{Seed: 3, Start: "2024-01-01T00:00:00Z", SecondsPerUnit: 1, Units: 1, UnitsPerLot: 1, SerialPattern: "D%d", LotPattern: "L%d",
		Part:   render.Part{Number: "disc", DiameterMM: 5, ClearApertureMM: 4},
		Camera: render.Camera{ID: "c", Width: 320, Height: 240, UMPerPx: 25, PixelFormat: "Mono12", ExposureUS: 1000, BlackLevelDN: 60, GainDNPerE: 0.25, DarkNoiseE: 8, BlurPx: 0.8},
		Lamp:   render.Lamp{MinPower: 1, MaxPower: 1}, Reference: render.Reference{XPx: 4, YPx: 4, WidthPx: 20, HeightPx: 20},
		Views:     []render.View{{Name: "ring", Light: render.LightRing, StrayDN: 20, ReferenceDN: 1200, ResponseDN: 2400}},
		Lines:     []render.Line{{Name: "A", Station: "A1"}},
		Processes: []render.Process{{Name: "p", Share: 1, HazeDN: render.Distribution{Value: 100}}}})
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	for kind, n := range map[string]int{render.FrameDark: 2, render.FrameStray: 2, render.FrameResponse: 2, "dots": 1} {
		if err := os.Mkdir(filepath.Join(dir, kind), 0o755); err != nil {
			t.Fatal(err)
		}
		for i := range n {
			var f pipeline.Frame
			if kind == "dots" {
				f, _, err = r.TargetFrame("ring", target, i)
			} else {
				f, err = r.CalibrationFrame(kind, "ring", i)
			}
			if err == nil {
				err = files.Write(filepath.Join(dir, kind, fmt.Sprintf("%d.pgm", i)), f.Raw)
			}
			if err != nil {
				t.Fatal(err)
			}
		}
	}
	if err := os.WriteFile(filepath.Join(dir, "dark", "1.json"), []byte(`{"unit": "x", "sensor_c": 36.5}`), 0o600); err != nil {
		t.Fatal(err)
	}
	return dir
}

func TestCalibrateVerb(t *testing.T) {
	dir := calibrationFolders(t)
	in := func(name string) string { return filepath.Join(dir, name) }
	args := []string{"calibrate", in("out"), "--dark", in("dark"), "--stray", in("stray"), "--response", in("response"), "--dots", in("dots"),
		"--dot-pitch-um", "1000", "--certificate-serial", "T-9", "--certificate-date", "2024-01-01", "--certificate-uncertainty-um", "0.5",
		"--patch", "6,6,16,16", "--camera", "c", "--light", "ring", "--mode", "m", "--exposure-us", "1000", "--black-level", "60", "--report", in("page.html"), "--json"}
	var out, errOut bytes.Buffer
	if code := run(args, &out, &errOut); code != exitDone {
		t.Fatalf("exit %d: %s", code, errOut.String())
	}
	var got struct {
		Scale  pipeline.Scale             `json:"scale"`
		Sensor pipeline.SensorTemperature `json:"sensor_temperature"`
		Patch  pipeline.ReferencePatch    `json:"reference_patch"`
	}
	if err := json.Unmarshal(out.Bytes(), &got); err != nil {
		t.Fatal(err)
	}
	if math.Abs(got.Scale.UMPerPx-25) > 3*got.Scale.UncertaintyUM || got.Scale.Source != "dot target T-9, certificate of 2024-01-01" ||
		got.Sensor.MeanC != 36.5 || math.Abs(got.Patch.LevelDN-1226) > 15 {
		t.Errorf("got %+v", got)
	}
	page, err := os.ReadFile(in("page.html"))
	if err != nil || !strings.Contains(string(page), "Calibration of c, light ring, mode m") || !strings.Contains(string(page), "T-9") {
		t.Errorf("page: %v", err)
	}
	if c, err := calibrate.Load(in("out")); err != nil || c.Scale != got.Scale {
		t.Errorf("folder: %v", err)
	}
}

func TestCalibrateRefusesWrongFlags(t *testing.T) {
	dir := calibrationFolders(t)
	list := filepath.Join(dir, "list.csv")
	if err := os.WriteFile(list, []byte("10,20\n30,wide\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	for want, flags := range map[string][]string{
		`--patch: got "1,2,3", want X,Y,W,H`:                 {"--patch", "1,2,3"},
		`--patch: got "1,2,0,4", want X,Y,W,H`:               {"--patch", "1,2,0,4"},
		`row 2, column 2: got "wide", want a diameter in µm`: {"--sizing-diameters", list},
		"want one of the two":                                {"--dots", filepath.Join(dir, "dots"), "--um-per-px", "25"},
		"um_per_px: got 0":                                   nil,
		"ramp.csv":                                           {"--um-per-px", "25", "--ramp", filepath.Join(dir, "dark")},
	} {
		args := append([]string{"calibrate", filepath.Join(dir, "out"), "--dark", filepath.Join(dir, "dark"), "--camera", "c", "--light", "ring", "--mode", "m", "--exposure-us", "1"}, flags...)
		var out, errOut bytes.Buffer
		if code := run(args, &out, &errOut); code != exitUsage || !strings.Contains(errOut.String(), want) {
			t.Errorf("%v: exit %d, %s", flags, code, errOut.String())
		}
	}
}
