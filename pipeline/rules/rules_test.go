package rules

import (
	"errors"
	"math"
	"strings"
	"testing"
)

type mark struct {
	kind        string
	width, area float64
	saturated   bool
}

func marks() *Record[mark] {
	return NewRecord("defect",
		TextField("kind", func(m *mark) string { return m.kind }),
		NumberField("width_um", func(m *mark) float64 { return m.width }),
		NumberField("area_um2", func(m *mark) float64 { return m.area }),
		TruthField("saturated", func(m *mark) bool { return m.saturated }),
	)
}

// sample is a dig 5 µm wide of 20 µm² and a scratch 2 µm wide of 30 µm²; the variables
// of the record are the dig's.
func sample() ([]Var, Values) {
	r := marks()
	two := []mark{{"dig", 5, 20, false}, {"scratch", 2, 30, true}}
	return append(r.Vars(), r.Var("defects")), Several{Map{"defects": r.List(two)}, r.Of(&two[0])}
}

func TestNumber(t *testing.T) {
	vars, values := sample()
	for expr, want := range map[string]float64{
		"1/2":                                   0.5,
		"4*width_um":                            20,
		"-width_um + 1":                         -4,
		"defects.size()":                        2,
		"size(defects) * 3":                     6,
		"count(defects)":                        2,
		"kind.size()":                           3,
		"sum(defects.map(d, d.area_um2))":       50,
		"max(defects.map(d, d.area_um2))":       30,
		"largest(defects.map(d, d.width_um))":   5,
		"min(defects.map(d, d.area_um2))":       20,
		"sum([])":                               0,
		"max([])":                               0,
		"max([], 7)":                            7,
		"min([], 7)":                            7,
		"max(1, 2)":                             2,
		"min(1, 2)":                             1,
		"sqrt(16) + abs(-2)":                    6,
		"[4, 5][1]":                             5,
		"width_um > 4 ? 1 : 0":                  1,
		"defects.filter(d, d.saturated).size()": 1,
	} {
		p, err := Compile(expr, vars, Number)
		if err != nil {
			t.Errorf("%s: %v", expr, err)
			continue
		}
		if got, err := p.Number(values); err != nil || got != want {
			t.Errorf("%s = %v, %v; want %v", expr, got, err, want)
		}
	}
}

func TestBool(t *testing.T) {
	vars, values := sample()
	for expr, want := range map[string]bool{
		"width_um >= 5":                             true,
		"width_um > 5":                              false,
		"4*width_um == 20":                          true,
		`kind in ["dig", "stain"] && !saturated`:    true,
		`defects.exists(d, d.kind == "scratch")`:    true,
		"defects.exists_one(d, d.width_um > 3)":     true,
		"defects.all(d, d.area_um2 >= 20)":          true,
		"defects.size() == 2 && size(defects) != 3": true,
	} {
		p, err := Compile(expr, vars, Truth)
		if err != nil {
			t.Errorf("%s: %v", expr, err)
			continue
		}
		if got, err := p.Bool(values); err != nil || got != want {
			t.Errorf("%s = %v, %v; want %v", expr, got, err, want)
		}
	}
}

func TestText(t *testing.T) {
	vars, values := sample()
	p, err := Compile(`"a " + kind`, vars, Text)
	if err != nil {
		t.Fatal(err)
	}
	if got, err := p.TextOf(values); err != nil || got != "a dig" {
		t.Errorf("got %q, %v", got, err)
	}
}

func TestNothingThatIsNotFiniteTakesPart(t *testing.T) {
	vars, values := sample()
	for _, expr := range []string{
		"width_um / 0 > 1",
		"!(width_um / (width_um - 5) > 1)",
		"0/0 == 0/0",
		"sqrt(-width_um) < 1",
		"1e300 * 1e300 > 1",
		"1e308 + 1e308 > 1",
		"-1e308 - 1e308 < 1",
		"sum([1e308, 1e308]) > 1",
		"min(defects.filter(d, d.area_um2 > 99).map(d, d.area_um2)) > 1",
	} {
		p, err := Compile(expr, vars, Truth)
		if err != nil {
			t.Errorf("%s: %v", expr, err)
			continue
		}
		if got, err := p.Bool(values); err == nil {
			t.Errorf("%s = %v without an error", expr, got)
		}
	}
}

func TestMeasureThatIsNotFinite(t *testing.T) {
	r := marks()
	for _, bad := range []float64{math.NaN(), math.Inf(1), math.Inf(-1)} {
		list := []mark{{kind: "dig", width: bad}}
		for expr, values := range map[string]Values{
			"width_um < 10":                        r.Of(&list[0]),
			"defects.exists(d, d.width_um < 10)":   Map{"defects": r.List(list)},
			"sum(defects.map(d, d.width_um)) < 10": Map{"defects": r.List(list)},
		} {
			p, err := Compile(expr, append(r.Vars(), r.Var("defects")), Truth)
			if err != nil {
				t.Fatal(err)
			}
			if got, err := p.Bool(values); err == nil || !strings.Contains(err.Error(), "width_um") {
				t.Errorf("%s with %v = %v, %v; want an error that names width_um", expr, bad, got, err)
			}
		}
	}
}

func TestWrongOrMissingValue(t *testing.T) {
	p, err := Compile("a > 1", []Var{{Name: "a", Type: Number}}, Truth)
	if err != nil {
		t.Fatal(err)
	}
	for _, values := range []Map{{}, {"a": "2"}, {"a": 2}, {"a": true}} {
		if got, err := p.Bool(values); err == nil {
			t.Errorf("%v gave %v without an error", values, got)
		}
	}
}

func TestCostLimit(t *testing.T) {
	r := marks()
	p, err := Compile("defects.all(a, defects.all(b, defects.all(c, defects.all(d, d.width_um >= 0))))", []Var{r.Var("defects")}, Truth)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := p.Bool(Map{"defects": r.List(make([]mark, 300))}); err == nil || !strings.Contains(err.Error(), "cost") {
		t.Errorf("got %v, want the cost limit", err)
	}
}

func TestSyntaxErrors(t *testing.T) {
	vars, _ := sample()
	for _, c := range []struct {
		expr string
		want Type
		is   string
	}{
		{"widht_um > 3", Truth, "1:1: unknown name 'widht_um' (did you mean 'width_um'?)"},
		{"width_um > 3 &&\n  lenght > 2", Truth, "2:3: unknown name 'lenght' (names: kind, width_um, area_um2, saturated, defects)"},
		{"'µ' == kind && wdth_um > 1", Truth, "1:16: unknown name 'wdth_um' (did you mean 'width_um'?)"},
		{"defects.exists(d, d.wdth_um > 1)", Truth, "1:20: unknown name 'wdth_um' (did you mean 'width_um'?)"},
		{"szie(defects)", Number, "1:1: unknown name 'szie' (did you mean 'size'?)"},
		{"snt > 3", Truth, "1:1: unknown name 'snt' (names: kind, width_um, area_um2, saturated, defects)"},
		{"kind + 1", Text, "1:6: these operands do not go together: '+' applied to '(text, number)'"},
		{"4 *", Number, "1:4: the expression ends too early"},
		{"width_um", Truth, "1:1: the expression gives a number, want a condition (true or false)"},
		{"width_um > 1", Number, "1:1: the expression gives a condition (true or false), want a number"},
		{"defects", Number, "1:1: the expression gives a list, want a number"},
		{"defect{}.kind", Text, "1:7: braces make a value that nothing here can use"},
		{"  ", Truth, "1:1: the expression is empty, want a condition (true or false)"},
	} {
		_, err := Compile(c.expr, vars, c.want)
		var all SyntaxErrors
		if !errors.As(err, &all) || err.Error() != c.is {
			t.Errorf("%q: got %v\nwant %s", c.expr, err, c.is)
		}
	}
}

func TestEveryUnknownNameIsReported(t *testing.T) {
	vars, _ := sample()
	_, err := Compile("lenght > 1 || hight > 2", vars, Truth)
	var all SyntaxErrors
	if !errors.As(err, &all) || len(all) != 2 {
		t.Errorf("got %v, want two errors", err)
	}
}

func TestBounds(t *testing.T) {
	for _, expr := range []string{
		strings.Repeat("1+", MaxLength) + "1",
		strings.Repeat("(", 400) + "1" + strings.Repeat(")", 400),
		strings.Repeat("[", 400) + "1" + strings.Repeat("]", 400),
	} {
		if _, err := Compile(expr, nil, Number); err == nil {
			t.Errorf("%.20s… (%d bytes) was accepted", expr, len(expr))
		}
	}
}

func TestFaultyVars(t *testing.T) {
	for _, vars := range [][]Var{
		{{Name: "Width", Type: Number}},
		{{Name: "w", Type: Number}, {Name: "w", Type: Text}},
		{{Name: "w"}},
		{{Name: "w", Type: Records}},
	} {
		if _, err := Compile("1", vars, Number); err == nil {
			t.Errorf("%v was accepted", vars)
		}
	}
}

func TestNearest(t *testing.T) {
	names := []string{"width_um", "length_um", "kind"}
	for word, want := range map[string]string{
		"widht_um": "width_um", "lenght_um": "length_um", "knd": "kind", "flux": "", "w": "", "kind": "kind",
	} {
		if got := Nearest(word, names); got != want {
			t.Errorf("Nearest(%q) = %q, want %q", word, got, want)
		}
	}
	// Value from memory: kitten → sitting takes 3 edits (Levenshtein's usual example).
	if d := editDistance("kitten", "sitting"); d != 3 {
		t.Errorf("kitten → sitting: %d edits, want 3", d)
	}
}
