package render

import (
	"fmt"

	"lapgate/pipeline"
)

// Spoiler is something that makes one unit's frames unfit to be judged as they are.
type Spoiler struct {
	Unit  int     `yaml:"unit" json:"-"`      // index in the scene, from 0
	View  string  `yaml:"view" json:"view"`   // empty = every view; not for what is wrong with the part itself
	Kind  string  `yaml:"kind" json:"kind"`   // one of the Spoil names
	Value float64 `yaml:"value" json:"value"` // see the Spoil names
}

// The kinds of Spoiler, with what Value means.
const (
	SpoilLamp         = "lamp"           // lamp power relative to what it would be
	SpoilCap          = "cap"            // the lens is capped: no light (no value)
	SpoilEmptyNest    = "empty_nest"     // no part (no value)
	SpoilDefocus      = "defocus"        // sigma of the blur, px
	SpoilBlackBand    = "black_band"     // share of the rows that were not transferred
	SpoilDiameter     = "wrong_diameter" // diameter of the part, mm
	SpoilMatt         = "matt"           // haze of a surface that is not polished, DN
	SpoilFingerprint  = "fingerprint"    // brightness of its ridges, DN
	SpoilQuarterStain = "quarter_stain"  // what a stain over a quarter of the part adds, DN
	SpoilBroken       = "broken"         // depth of the segment broken off, mm
	SpoilOilFilm      = "oil_film"       // root mean square of its fringes, DN
	SpoilGrain        = "grain"          // root mean square of the grain that rough polish leaves, DN
	SpoilShift        = "camera_shift"   // px to the right by which the read-out window of the sensor moved
)

// ofPart reports whether the spoiler is a fault of the part and not of the picture.
func (sp Spoiler) ofPart() bool {
	switch sp.Kind {
	case SpoilDiameter, SpoilMatt, SpoilFingerprint, SpoilQuarterStain, SpoilBroken, SpoilOilFilm, SpoilGrain:
		return true
	}
	return false
}

func (s Scene) checkSpoilers() error {
	for i, sp := range s.Spoilers {
		key := fmt.Sprintf("spoilers[%d].", i)
		err := firstBad(oneOf(key+"kind", sp.Kind, SpoilLamp, SpoilCap, SpoilEmptyNest, SpoilDefocus, SpoilBlackBand, SpoilDiameter,
			SpoilMatt, SpoilFingerprint, SpoilQuarterStain, SpoilBroken, SpoilOilFilm, SpoilGrain, SpoilShift), atLeast(key+"unit", float64(sp.Unit), 0), atLeast(key+"value", sp.Value, 0))
		if err != nil {
			return err
		}
		if sp.View != "" && (sp.ofPart() || s.viewIndex(sp.View) < 0) {
			return pipeline.Invalid("%sview: got %q, want none or, for a fault of the picture, a view of the scene", key, sp.View)
		}
		if sp.Kind == SpoilBlackBand && sp.Value > 1 || sp.Kind == SpoilDiameter && sp.Value == 0 {
			return pipeline.Invalid("%svalue: got %g, want a share up to 1 for black_band, a diameter for wrong_diameter", key, sp.Value)
		}
	}
	return nil
}

func (s Scene) viewIndex(name string) int {
	for i, v := range s.Views {
		if v.Name == name {
			return i
		}
	}
	return -1
}

func (s Scene) spoilersOf(unit int) []Spoiler {
	out := []Spoiler{}
	for _, sp := range s.Spoilers {
		if sp.Unit == unit {
			out = append(out, sp)
		}
	}
	return out
}

// apply changes what holds for the whole unit.
func (sp Spoiler) apply(u *Unit) {
	switch sp.Kind {
	case SpoilDiameter:
		u.DiameterMM = sp.Value
	case SpoilMatt:
		u.HazeDN, u.LayDN = sp.Value, 0
	}
}

// spoiled returns the value of the unit's spoiler of a kind in a view.
func (u Unit) spoiled(kind, view string) (float64, bool) {
	for _, sp := range u.Spoilers {
		if sp.Kind == kind && (sp.View == "" || sp.View == view) {
			return sp.Value, true
		}
	}
	return 0, false
}
