package configs

import (
	"bytes"
	"errors"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
)

type lamp struct {
	Name       string
	PowerMW    float64
	Pulses     int
	Count      uint8
	On         bool
	Limit      *float64
	Tags       []string
	ByName     map[string]float64
	Box        [2]int
	Inner      inner
	ExposureUS float64 `json:"exposure_us"`
	Renamed    int     `yaml:"other_name"`
	Hidden     int     `yaml:"-"`
}

type inner struct{ Depth int }

func decode(t *testing.T, text string) (lamp, error) {
	t.Helper()
	v, _, err := Decode("f.yaml", []byte(text), lamp{Name: "ring", Pulses: 3, Inner: inner{Depth: 7}})
	return v, err
}

func TestFileIsLaidOverDefaults(t *testing.T) {
	got, err := decode(t, `format: 1
power_mw: 1e3
count: 255
on: true
limit: 2.5
tags: [a, "1"]
by_name: {x: 1, y: -2.0}
box: [1, 2]
exposure_us: 1_000
other_name: 9
`)
	limit := 2.5
	want := lamp{Name: "ring", PowerMW: 1000, Pulses: 3, Count: 255, On: true, Limit: &limit, Tags: []string{"a", "1"},
		ByName: map[string]float64{"x": 1, "y": -2}, Box: [2]int{1, 2}, Inner: inner{Depth: 7}, ExposureUS: 1000, Renamed: 9}
	if err != nil || !reflect.DeepEqual(got, want) {
		t.Errorf("got %+v, %v\nwant %+v", got, err, want)
	}
}

func TestOnlyFormatIsTheDefaults(t *testing.T) {
	got, err := decode(t, "format: 1\n")
	if err != nil || got.Name != "ring" || got.Pulses != 3 {
		t.Errorf("got %+v, %v", got, err)
	}
}

func TestProblems(t *testing.T) {
	keys := "one of name, power_mw, pulses, count, on, limit, tags, by_name, box, inner, exposure_us, other_name"
	for _, c := range []struct{ text, is string }{
		{"", "f.yaml: the file is empty, want its content; perhaps it was saved only half"},
		{" \n\n", "f.yaml: the file is empty, want its content; perhaps it was saved only half"},
		{"# only words\n", "f.yaml: the file holds only comments, want settings; perhaps it was saved only half"},
		{"format: 1\nname: \xff\n", "f.yaml: the file is not UTF-8 text, want YAML"},
		{"- a\n", "f.yaml:1:1: the file starts with a list, want keys with values (key: value)"},
		{"format: 1\n---\nformat: 1\n", "f.yaml:3:1: a second document starts here, want one document in a file"},
		{"name: a\n", "f.yaml:1:1: format: the key is missing, want format: 1 at the top of the file"},
		{"format: 2\nnew_key: 1\n", "f.yaml:1:9: format: got 2, which a newer version of this program wrote, want 1; update the program"},
		{"format: one\n", "f.yaml:1:9: format: got one, want a whole number"},
		{"format: 1\nformat: 1\n", "f.yaml:2:9: format: the key is given twice, want it once"},
		{"format: 1\npulse: 1\n", `f.yaml:2:1: unknown key "pulse" (did you mean "pulses"?), want ` + keys},
		{"format: 1\nPulses: 1\n", `f.yaml:2:1: unknown key "Pulses" (did you mean "pulses"?), want ` + keys},
		{"format: 1\nhidden: 1\n", `f.yaml:2:1: unknown key "hidden", want ` + keys},
		{"format: 1\ninner:\n  depht: 1\n", `f.yaml:3:3: inner: unknown key "depht" (did you mean "depth"?), want depth`},
		{"format: 1\npulses: 1\non: true\npulses: 2\n", "f.yaml:4:1: pulses: the key is given twice, want it once"},
		{"format: 1\nby_name: {x: 1, x: 2}\n", "f.yaml:2:17: by_name.x: the key is given twice, want it once"},
		{"format: 1\npulses: 2.9\n", "f.yaml:2:9: pulses: got 2.9, want a whole number"},
		{"format: 1\npulses: 2.0\n", "f.yaml:2:9: pulses: got 2.0, want a whole number"},
		{"format: 1\npulses: 010\n", "f.yaml:2:9: pulses: got 010, want a whole number"},
		{"format: 1\npulses: \"7\"\n", "f.yaml:2:9: pulses: got the text \"7\", want a whole number"},
		{"format: 1\npulses: 99999999999999999999\n", "f.yaml:2:9: pulses: got 99999999999999999999, want a whole number of 64 bits"},
		{"format: 1\ncount: 256\n", "f.yaml:2:8: count: got 256, want a whole number from 0 to 255"},
		{"format: 1\ncount: -1\n", "f.yaml:2:8: count: got -1, want a whole number from 0 to 255"},
		{"format: 1\npower_mw: .nan\n", "f.yaml:2:11: power_mw: got .nan, want a finite number"},
		{"format: 1\npower_mw: -.inf\n", "f.yaml:2:11: power_mw: got -.inf, want a finite number"},
		{"format: 1\npower_mw: 1e999\n", "f.yaml:2:11: power_mw: got 1e999, want a finite number"},
		{"format: 1\npower_mw: NaN\n", "f.yaml:2:11: power_mw: got NaN, want a finite number"},
		{"format: 1\npower_mw: 1 2\n", "f.yaml:2:11: power_mw: got 1 2, want a finite number"},
		{"format: 1\non: yes\n", "f.yaml:2:5: on: got yes, want true or false"},
		{"format: 1\nname: 25\n", "f.yaml:2:7: name: got 25, want a text: put it in quotes, \"25\""},
		{"format: 1\nname:\n", "f.yaml:2:7: name: no value is given, want a value, or delete the line to keep the default"},
		{"format: 1\nname: [a]\n", "f.yaml:2:7: name: got a list, want a text"},
		{"format: 1\ntags: a\n", "f.yaml:2:7: tags: got a, want a list (one line with a dash for each)"},
		{"format: 1\nbox: [1]\n", "f.yaml:2:6: box: got a list of 1, want a list of 2"},
		{"format: 1\ninner: 3\n", "f.yaml:2:8: inner: got 3, want keys with values: depth"},
		{"format: 1\nname: &a b\n", "f.yaml:2:7: name: got an anchor (&), want a plain value: anchors, aliases and tags are not read here"},
		{"format: 1\nname: !!str b\n", "f.yaml:2:7: name: got the tag !!str, want a plain value: anchors, aliases and tags are not read here"},
		{"format: 1\n<<: {name: b}\n", `f.yaml:2:1: unknown key "<<", want ` + keys},
		{"format: 1\nname: 'a\n", "f.yaml:2:7: not valid YAML: could not find end character of single-quoted text"},
		{"format: 1\ntags: [a,\n", "f.yaml:2:7: not valid YAML: sequence end token ']' not found"},
	} {
		_, err := decode(t, c.text)
		var all Problems
		if !errors.As(err, &all) || err.Error() != c.is {
			t.Errorf("%q:\ngot  %v\nwant %s", c.text, err, c.is)
		}
	}
}

func TestAllProblemsAtOnce(t *testing.T) {
	_, err := decode(t, "format: 1\npulses: 2.5\nnmae: a\non: 1\ninner: {x: 1}\n")
	var all Problems
	if !errors.As(err, &all) || len(all) != 4 {
		t.Fatalf("got %v, want four problems", err)
	}
	for i, p := range all {
		if p.Line != i+2 {
			t.Errorf("problem %d is at line %d, want %d: they go by line", i, p.Line, i+2)
		}
	}
}

func TestFaultyFileLeavesTheDefaults(t *testing.T) {
	got, err := decode(t, "format: 1\nname: other\npulses: x\n")
	if err == nil || got.Name != "ring" {
		t.Errorf("got %+v, %v; want the defaults beside the error", got, err)
	}
}

func TestByteOrderMarkAndCarriageReturns(t *testing.T) {
	got, err := decode(t, "\ufeffformat: 1\r\nname: bar\r\npulses: 4\r\n")
	if err != nil || got.Name != "bar" || got.Pulses != 4 {
		t.Errorf("got %+v, %v", got, err)
	}
}

func TestLoadFile(t *testing.T) {
	path := filepath.Join(t.TempDir(), "f.yaml")
	if _, _, err := Load[lamp](path); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("missing file: got %v", err)
	}
	text := []byte("format: 1\nname: bar\n")
	if err := os.WriteFile(path, text, 0o600); err != nil {
		t.Fatal(err)
	}
	v, src, err := Load[lamp](path)
	if err != nil || v.Name != "bar" || src.File != path || !bytes.Equal(src.Text, text) {
		t.Errorf("got %+v, %+v, %v", v, src, err)
	}
	if err := os.WriteFile(path, bytes.Repeat([]byte("# x\n"), MaxFileBytes/4+1), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, _, err := Load[lamp](path); err == nil || !strings.Contains(err.Error(), "bytes, want at most") {
		t.Errorf("large file: got %v", err)
	}
}

// The SHA-256 of "abc" is the worked example of FIPS 180-2, appendix B.1 (value from memory).
func TestHash(t *testing.T) {
	if got, want := HashOf([]byte("abc")), "sha256:ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"; got != want {
		t.Errorf("got %s, want %s", got, want)
	}
}

func TestSnakeCase(t *testing.T) {
	for name, want := range map[string]string{
		"UMPerPx": "um_per_px", "AreaUM2": "area_um2", "KLow": "k_low", "SNR": "snr", "ViewTimeoutMS": "view_timeout_ms",
		"MaxBytesInFlight": "max_bytes_in_flight", "Part": "part", "MinAreaPx": "min_area_px",
	} {
		if got := snakeCase(name); got != want {
			t.Errorf("%s: got %s, want %s", name, got, want)
		}
	}
}

func TestAt(t *testing.T) {
	src, problems := parse("r.yaml", []byte("a: 1\nviews:\n  - name: µ\n    stages:\n    - type: x\n      k_low: 3\n    - {type: y, k: 2}\nt: 'ab'\nl: |\n    one\n    two\n"))
	if problems != nil {
		t.Fatal(problems)
	}
	for path, want := range map[string]string{
		"a":                             "r.yaml:1:4",
		"$.views[0].name":               "r.yaml:3:11",
		"views[0].stages[0].k_low":      "r.yaml:6:14",
		"$.views[0].stages[1].k":        "r.yaml:7:20",
		"views[0].stages[1]":            "r.yaml:7:7",
		"views[0].stages[0]":            "r.yaml:5:7",
		"views[0].stages[0].none.there": "r.yaml:5:7",
		"views[9].name":                 "r.yaml:3:3",
	} {
		if got := src.At(path); got != want {
			t.Errorf("%s: got %s, want %s", path, got, want)
		}
	}
	for _, c := range []struct {
		path         string
		line, column int
		want         string
	}{{"t", 1, 2, "r.yaml:8:6"}, {"l", 2, 3, "r.yaml:11:7"}, {"views[0].name", 1, 1, "r.yaml:3:11"}, {"t", 0, 0, "r.yaml:8:4"}} {
		if got := src.Within(c.path, c.line, c.column, "x", "").Where(); got != c.want {
			t.Errorf("%s %d:%d: got %s, want %s", c.path, c.line, c.column, got, c.want)
		}
	}
}

// FuzzDecode says that no text makes the reader panic or give a number that is not finite.
func FuzzDecode(f *testing.F) {
	for _, s := range []string{"format: 1\n", "format: 1\nlimit: .nan\n", "format: 1\n? a\n: b\n", "format: 1\ninner: {depth: 1}\n", "{format: 1, tags: [a, b]}", "format: 1\nname: |\n  a\n b\n", "format: 1\nname: *a\n", "- - -"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		v, src, err := Decode("f.yaml", text, lamp{})
		if err == nil && (v.PowerMW != v.PowerMW || v.Limit != nil && *v.Limit != *v.Limit) {
			t.Fatalf("%q gave a number that is none: %+v", text, v)
		}
		var all Problems
		if err != nil && (!errors.As(err, &all) || len(all) == 0) {
			t.Fatalf("%q: an error that is no Problems: %v", text, err)
		}
		if src.root != nil {
			src.At("inner.depth")
		}
	})
}
