package configs

import "testing"

func TestShowWritesWhatTheReaderReads(t *testing.T) {
	type band struct{ LowUM, HighUM float64 }
	type all struct {
		GridPx   int
		Polarity string `yaml:"polarity"`
		Bands    []band
	}
	want := all{64, "bright", []band{{1, 2}, {3.5, 4}}}
	text, err := Show(want)
	if err != nil {
		t.Fatal(err)
	}
	got, _, err := Decode("shown.yaml", []byte("format: 1\n"+text), all{})
	if err != nil || got.GridPx != 64 || got.Polarity != "bright" || len(got.Bands) != 2 || got.Bands[1] != want.Bands[1] {
		t.Errorf("read back %+v (%v) from\n%s", got, err, text)
	}
	asJSON, err := ShowJSON(want)
	if err != nil || string(asJSON) != `{"grid_px": 64, "polarity": "bright", "bands": [{"low_um": 1.0, "high_um": 2.0}, {"low_um": 3.5, "high_um": 4.0}]}` {
		t.Errorf("JSON %s (%v)", asJSON, err)
	}
}
