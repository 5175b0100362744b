package limits

import (
	"strings"
	"testing"
)

func most(v float64) *float64 { return &v }

func TestOpticsThatServeOrNot(t *testing.T) {
	dig := func(um float64) Spec {
		return Spec{Name: "dig", Kind: "dig", Each: "diameter_um", AtMost: most(um), Unit: "um"}
	}
	scratch := func(um float64) Spec {
		return Spec{Name: "scratch", Kind: "scratch", Each: "width_um", AtMost: most(um), Unit: "um"}
	}
	ring := Optics{View: "ring", UMPerPx: 10, BlurUM: 17}
	sized, coarse, back := ring, Optics{View: "wide", UMPerPx: 23.5}, Optics{View: "back", UMPerPx: 10, ShowsEdge: true}
	sized.Sized = true
	for name, c := range map[string]struct {
		spec   Spec
		views  []Optics
		want   string // empty: no warning
		refuse bool
	}{
		"200 µm at 10 µm/px":            {dig(200), []Optics{ring}, "", false},
		"40 µm are 4 px":                {dig(40), []Optics{ring}, "4.0 px of view ring (10 um/px) and 2.4 widths of its blur", false},
		"40 µm with a curve":            {dig(40), []Optics{sized}, "", false},
		"a curve does not size widths":  {scratch(20), []Optics{sized}, "2.0 px of view ring", false},
		"twice the blur":                {scratch(60), []Optics{{View: "ring", UMPerPx: 10, BlurUM: 40}}, "1.5 widths of its blur (40 um)", false},
		"below a pixel even with curve": {dig(8), []Optics{sized}, "cannot resolve this limit", false},
		"the better view counts":        {dig(60), []Optics{coarse, ring}, "", false},
		"scale not known":               {dig(1), []Optics{{View: "ring"}}, "", false},
		"not a size":                    {Spec{Name: "n", Value: "size(defects)", AtMost: most(3), Unit: "1"}, []Optics{coarse}, "", false},
		"chips without an edge":         {Spec{Name: "chip", Kind: "edge chip", Each: "reach_um", AtMost: most(200), Unit: "um"}, []Optics{ring}, "no view shows the part's edge", true},
		"chips by a rule":               {Spec{Name: "chip", Broken: `defects.exists(d, d.kind == "edge chip")`}, []Optics{ring}, "no view shows the part's edge", true},
		"chips with an edge":            {Spec{Name: "chip", Kind: "edge chip", Each: "reach_um", AtMost: most(200), Unit: "um"}, []Optics{ring, back}, "", false},
		"small chips":                   {Spec{Name: "chip", Kind: "edge chip", Each: "reach_um", AtMost: most(30), Unit: "um"}, []Optics{ring, back}, "3.0 px of view back", false},
	} {
		got := CheckOptics([]Spec{c.spec}, c.views)
		switch {
		case c.want == "" && len(got) > 0:
			t.Errorf("%s: got %+v, want no warning", name, got)
		case c.want != "" && (len(got) != 1 || !strings.Contains(got[0].Text, c.want) || got[0].Refuse != c.refuse):
			t.Errorf("%s: got %+v, want %q", name, got, c.want)
		}
	}
}
