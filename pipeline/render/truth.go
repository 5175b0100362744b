package render

import (
	"math"

	"lapgate/pipeline"
)

// Truth is what is true of one unit.
type Truth struct {
	pipeline.Identity
	DiameterUM   float64     `json:"diameter_um"` // of the part
	PartAngleDeg float64     `json:"part_angle_deg"`
	LampPower    float64     `json:"lamp_power"` // relative to nominal, without spoilers
	HazeDN       float64     `json:"haze_dn"`
	Views        []TruthView `json:"views"`
	Objects      []Object    `json:"objects"`
	Worst        Worst       `json:"worst"`
	Broken       []string    `json:"broken_limits"` // keys of the scene's limits
	NearLimit    bool        `json:"near_limit"`    // a worst value lies within ±10 % of its limit
	Spoilers     []Spoiler   `json:"spoilers"`
	Conforming   bool        `json:"conforming"` // no limit is broken and no spoiler is a fault of the part
}

// TruthView is where the part is in one view.
type TruthView struct {
	Name     string  `json:"name"`
	CentreX  float64 `json:"centre_x"` // px
	CentreY  float64 `json:"centre_y"`
	RadiusPx float64 `json:"radius_px"`
	UMPerPx  float64 `json:"um_per_px"`
}

// Worst is the largest of everything that has a limit. Dust and fibres have none.
type Worst struct {
	DigDiameterUM   float64 `json:"dig_diameter_um"`
	DigAreaUM2      float64 `json:"dig_area_um2"` // sum
	ScratchWidthUM  float64 `json:"scratch_width_um"`
	ScratchLengthUM float64 `json:"scratch_length_um"`
	StainDiameterUM float64 `json:"stain_diameter_um"`
	EdgeChipUM      float64 `json:"edge_chip_um"`
}

func (w *Worst) add(o Object) {
	switch o.Kind {
	case pipeline.Dig:
		w.DigDiameterUM = max(w.DigDiameterUM, o.DiameterUM)
		w.DigAreaUM2 += math.Pi / 4 * o.DiameterUM * o.DiameterUM
	case pipeline.Scratch:
		w.ScratchWidthUM = max(w.ScratchWidthUM, o.WidthUM)
		w.ScratchLengthUM = max(w.ScratchLengthUM, o.LengthUM)
	case pipeline.Stain:
		w.StainDiameterUM = max(w.StainDiameterUM, o.DiameterUM)
	case pipeline.EdgeChip:
		w.EdgeChipUM = max(w.EdgeChipUM, o.WidthUM)
	}
}

// nearLimit is how close to a limit, relative to it, a value is called near.
const nearLimit = 0.1

// Compare returns the keys of the limits that w breaks, and whether a value lies near
// its limit.
func (l Limits) Compare(w Worst) (broken []string, near bool) {
	pairs := []struct {
		key        string
		got, limit float64
	}{
		{"dig_diameter_um", w.DigDiameterUM, l.DigDiameterUM}, {"dig_area_um2", w.DigAreaUM2, l.DigAreaUM2},
		{"scratch_width_um", w.ScratchWidthUM, l.ScratchWidthUM}, {"scratch_length_um", w.ScratchLengthUM, l.ScratchLengthUM},
		{"stain_diameter_um", w.StainDiameterUM, l.StainDiameterUM}, {"edge_chip_um", w.EdgeChipUM, l.EdgeChipUM},
	}
	broken = []string{}
	for _, p := range pairs {
		if p.limit == 0 {
			continue
		}
		if p.got > p.limit {
			broken = append(broken, p.key)
		}
		near = near || math.Abs(p.got-p.limit) <= nearLimit*p.limit
	}
	return broken, near
}

// truth gathers what is true of a unit; its sightings are those of the frames taken.
func (r *Renderer) truth(u Unit) Truth {
	t := Truth{Identity: u.Identity, DiameterUM: u.DiameterMM * 1000, PartAngleDeg: u.PartAngleDeg, LampPower: u.LampPower,
		HazeDN: u.HazeDN, Objects: u.Objects, Spoilers: u.Spoilers}
	if t.Objects == nil {
		t.Objects = []Object{}
	}
	for _, v := range r.scene.Views {
		st := r.stageOf(&u, v)
		t.Views = append(t.Views, TruthView{Name: v.Name, CentreX: st.x, CentreY: st.y, RadiusPx: st.radius, UMPerPx: r.scene.Camera.UMPerPx})
	}
	for _, o := range u.Objects {
		t.Worst.add(o)
	}
	t.Broken, t.NearLimit = r.scene.Limits.Compare(t.Worst)
	t.Conforming = len(t.Broken) == 0
	for _, s := range u.Spoilers {
		t.Conforming = t.Conforming && !s.ofPart()
	}
	return t
}
