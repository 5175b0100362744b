package proof

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strconv"

	"lapgate/pipeline"
	"lapgate/pipeline/drift"
	"lapgate/pipeline/raster"
)

// otherLevel is the patch's level in another view of the recipe.
type otherLevel struct {
	view    string
	levelDN float64
}

func otherLevels(box pipeline.Box, env pipeline.Environment) []otherLevel {
	var out []otherLevel
	for name, c := range env.Calibrations {
		if name == env.View || c == nil {
			continue
		}
		if p, err := drift.NewPatch(c, box); err == nil {
			out = append(out, otherLevel{name, p.LevelDN})
		}
	}
	slices.SortFunc(out, func(a, b otherLevel) int { return cmp.Compare(a.view, b.view) })
	return out
}

// proveLight gives one proof over all frames of the view: that of the frame furthest out.
func (st *stage) proveLight(item *pipeline.Item, planes []*raster.Plane) error {
	var worst *drift.Reading
	note := func(r drift.Reading) {
		if worst != nil {
			r = drift.Worse(*worst, r)
		}
		worst = &r
	}
	wrong := ""
	for i, f := range item.Frames {
		if says := f.Header.Tags[st.s.LightTag]; st.s.LightTag != "" && says != st.light {
			wrong = fmt.Sprintf("the header's tag %s says %q, the view is calibrated for light %q: the views are swapped or the wrong lamp was on", st.s.LightTag, says, st.light)
		}
		if st.s.PhotodiodeTag != "" {
			r, text := st.photodiode(f.Header.Tags)
			if text != "" {
				wrong = text
			} else {
				note(r)
			}
		}
		if st.patch != nil {
			r, err := st.patchLight(item, i, planes[i])
			if err != nil {
				return err
			}
			note(r)
		}
	}
	if worst == nil && st.s.PhotodiodeTag == "" && st.s.LightTag == "" {
		return nil
	}
	proof := pipeline.Proof{Name: pipeline.ProofLight, OK: true} // by the tag alone: nothing was measured
	if worst != nil {
		proof = worst.Proof()
	}
	if wrong != "" {
		proof.OK, proof.Reason, proof.Warning = false, wrong, ""
	}
	item.Prove(proof)
	return nil
}

// photodiode reads the tag; text says what is wrong with it.
func (st *stage) photodiode(tags map[string]string) (r drift.Reading, text string) {
	said := tags[st.s.PhotodiodeTag]
	v, err := strconv.ParseFloat(said, 64)
	if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
		return r, fmt.Sprintf("the header's tag %s is %q, want the photodiode's number", st.s.PhotodiodeTag, said)
	}
	return drift.Photodiode(v, st.s.PhotodiodeNominal, st.s.Light), ""
}

func (st *stage) patchLight(item *pipeline.Item, i int, raw *raster.Plane) (drift.Reading, error) {
	r, level, err := st.patch.Light(raw, item.Frames[i].Raw.Format.MaxCount(), item.Calibration, st.s.Light)
	if err != nil {
		return r, err
	}
	if i == 0 {
		item.Measure("patch_dn", level, "DN")
	}
	if r.State == drift.Held {
		for _, o := range st.others {
			if math.Abs(level-o.levelDN) <= 0.1*o.levelDN {
				r.Cause += fmt.Sprintf(", or the views are swapped: it is the level of view %s", o.view)
			}
		}
	}
	return r, nil
}
