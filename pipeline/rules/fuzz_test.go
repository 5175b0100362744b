package rules

import (
	"errors"
	"math"
	"testing"
)

// FuzzCompile says that no text makes Compile or a run panic, that a refusal has a
// place, and that a number that comes out is finite.
func FuzzCompile(f *testing.F) {
	for _, seed := range []string{
		"1/2", "4*width_um > 10", "defects.size() == 2", "sum(defects.map(d, d.area_um2))", "defects.exists_one(d, d.width_um > 3)",
		"min([], 4)", "[1,2][0]", "1u + 2u", "{1:2}[1]", "defect{}.kind", "x.y.z", "'µ' in [kind]", "\n1 +", "-9223372036854775808", "has(d.e)",
		"defects[0].kind", "defects.map(d, defects)[0][0].width_um", "null", "b'' == b''", "true ? 1 : 2", "size(size(defects))", "max(defects)",
	} {
		f.Add(seed)
	}
	vars, values := sample()
	f.Fuzz(func(t *testing.T, expr string) {
		p, err := Compile(expr, vars, Number)
		if err != nil {
			var all SyntaxErrors
			if !errors.As(err, &all) || len(all) == 0 || all[0].Line < 1 || all[0].Column < 1 {
				t.Fatalf("%q: an error without a place: %v", expr, err)
			}
			return
		}
		if v, err := p.Number(values); err == nil && (math.IsNaN(v) || math.IsInf(v, 0)) {
			t.Fatalf("%q = %v", expr, v)
		}
	})
}

func BenchmarkBool(b *testing.B) {
	r := marks()
	m := mark{"dig", 5, 20, false}
	p, err := Compile("area_um2 > 4*width_um && width_um >= 10", r.Vars(), Truth)
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		if _, err := p.Bool(r.Of(&m)); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkPairsOf700(b *testing.B) {
	r := marks()
	p, err := Compile("defects.all(a, defects.all(b, a.width_um - b.width_um < 1))", []Var{r.Var("defects")}, Truth)
	if err != nil {
		b.Fatal(err)
	}
	list := r.List(make([]mark, 700))
	for b.Loop() {
		if _, err := p.Bool(Map{"defects": list}); err != nil {
			b.Fatal(err)
		}
	}
}
