package limits

import (
	"fmt"
	"regexp"
	"slices"

	"lapgate/pipeline"
)

// Optics is what a view can resolve.
type Optics struct {
	View      string
	UMPerPx   float64 // 0 = not known: limits are then not held against the view
	BlurUM    float64 // width of a point at half height; 0 = not known
	Sized     bool    // the calibration has a sizing curve, so digs below the resolution are sized
	ShowsEdge bool    // the view has the stage edge
}

// Warning is a limit that the optics do not serve.
type Warning struct {
	Limit  int    // index in the list
	Name   string // of the limit
	Text   string
	Refuse bool // the recipe is not to be used
}

// leastPx is the size in pixels from which a size is measured rather than guessed, and
// leastBlurs the same in widths of the blur (common practice).
const (
	leastPx    = 5
	leastBlurs = 2
)

// sizes are the names of a rule that are a size of one defect in µm.
var sizes = []string{"diameter_um", "width_um", "length_um", "reach_um"}

// CheckOptics holds limits on the size of a defect against what the views resolve. A limit
// under 5 px, or under twice the blur, is resolved only by a sizing curve, which sizes
// digs by their flux; one under a pixel, or under half the blur, not even so. A limit on edge chips
// needs a view whose edge is followed: without one it is refused. Each limit is told once, for
// the view that serves it best.
func CheckOptics(specs []Spec, views []Optics) []Warning {
	var out []Warning
	for i, s := range specs {
		chip := s.aboutChips()
		serving := slices.DeleteFunc(slices.Clone(views), func(v Optics) bool { return v.ShowsEdge != chip })
		if chip && len(serving) == 0 {
			out = append(out, Warning{Limit: i, Name: s.Name, Refuse: true,
				Text: "no view shows the part's edge, so no chip would ever be found: add a view of the silhouette with the stage edge"})
			continue
		}
		if text := s.unresolved(serving); text != "" {
			out = append(out, Warning{Limit: i, Name: s.Name, Text: text})
		}
	}
	return out
}

func (s Spec) text() string { return s.Each + s.Value + s.Broken }

var chipWords = regexp.MustCompile(`\breach_um\b|["']edge chip["']`)

func (s Spec) aboutChips() bool {
	return s.Kind == string(pipeline.EdgeChip) || s.Kind == "" && chipWords.MatchString(s.text())
}

// size returns the name of the one size that the limit bounds.
func (s Spec) size() (string, bool) {
	if s.AtMost == nil || s.Unit != "um" {
		return "", false
	}
	for _, name := range sizes {
		if regexp.MustCompile(`\b` + name + `\b`).MatchString(s.text()) {
			return name, true
		}
	}
	return "", false
}

// unresolved says what is wrong with the view that resolves the limit best.
func (s Spec) unresolved(views []Optics) string {
	name, ok := s.size()
	if !ok {
		return ""
	}
	best, text := -1., ""
	for _, v := range views {
		if !(v.UMPerPx > 0) {
			return ""
		}
		px, blurs := *s.AtMost/v.UMPerPx, leastBlurs+1.
		if v.BlurUM > 0 {
			blurs = *s.AtMost / v.BlurUM
		}
		served := min(px/leastPx, blurs/leastBlurs)
		if served <= best {
			continue
		}
		best = served
		text = v.complaint(name, *s.AtMost, px, blurs)
	}
	return text
}

func (v Optics) complaint(name string, um, px, blurs float64) string {
	if px >= leastPx && blurs >= leastBlurs {
		return ""
	}
	size := fmt.Sprintf("%g um are %.1f px of view %s (%g um/px)", um, px, v.View, v.UMPerPx)
	if v.BlurUM > 0 {
		size += fmt.Sprintf(" and %.1f widths of its blur (%.0f um)", blurs, v.BlurUM)
	}
	switch sized := v.Sized && name == "diameter_um"; {
	case px < 1 || blurs < 0.5:
		return size + ": the optics cannot resolve this limit; take a lens of larger scale"
	case !sized:
		return fmt.Sprintf("%s, want %d px and %d widths: the size is guessed; give the calibration a sizing curve, or take a lens of larger scale", size, leastPx, leastBlurs)
	}
	return ""
}

// Specs returns what the Judge was made of.
func (j *Judge) Specs() []Spec { return slices.Clone(j.specs) }
