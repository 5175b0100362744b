package render

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"time"

	"lapgate/pipeline"
)

// Unit is one part as it lay under the camera. Objects may be changed or added before
// it is drawn.
type Unit struct {
	Identity     pipeline.Identity
	Index        int // in the scene, from 0
	Captured     time.Time
	Process      Process
	DiameterMM   float64
	HazeDN       float64 // without part of it: see Process.HazeTexture
	LayDN        float64 // root mean square of the lay
	LampPower    float64
	ShiftXPx     float64 // of the part's centre from the frame's, before the view turns it
	ShiftYPx     float64
	PartAngleDeg float64 // the part lay turned by this, from u towards v
	Objects      []Object
	Spoilers     []Spoiler
}

// Unit returns the first showing of the i-th unit of the scene, i from 0.
func (r *Renderer) Unit(i int) Unit { return r.Showing(i, 1) }

// Showing returns the n-th showing of the i-th unit, n from 1: the same surface, laid
// down anew and taken with new noise. It depends on nothing but the scene, i and n.
func (r *Renderer) Showing(i, n int) Unit {
	s := r.scene
	lot := i / s.UnitsPerLot
	line := s.Lines[lot%len(s.Lines)]
	process := s.processOfLot(lot)
	u := Unit{Index: i, Process: process, DiameterMM: s.Part.DiameterMM, Identity: pipeline.Identity{
		Part: s.Part.Number, Revision: s.Part.Revision, Surface: s.Part.Surface, Process: process.Name,
		Lot: fmt.Sprintf(s.LotPattern, lot+1), Unit: fmt.Sprintf(s.SerialPattern, i+1),
		Line: line.Name, Station: line.Station, Attempt: n, Purpose: pipeline.Production}}
	inLine := lot/len(s.Lines)*s.UnitsPerLot + i%s.UnitsPerLot
	u.Captured = s.start().Add(time.Duration(float64(inLine) * s.SecondsPerUnit * float64(time.Second)))
	r.layDown(&u)
	factor := line.DefectFactor
	if factor == 0 {
		factor = 1
	}
	r.addObjects(&u, factor)
	u.Spoilers = s.spoilersOf(i)
	for _, sp := range u.Spoilers {
		sp.apply(&u)
	}
	return u
}

// processOfLot deals the lots out by share: each lot goes to the process that is
// furthest behind on the lot's line.
func (s Scene) processOfLot(lot int) Process {
	total := 0.0
	for _, p := range s.Processes {
		total += p.Share
	}
	given := make([]float64, len(s.Processes))
	best := 0
	for n := range lot/len(s.Lines) + 1 {
		best = 0
		for i, p := range s.Processes {
			if p.Share/total*float64(n+1)-given[i] > s.Processes[best].Share/total*float64(n+1)-given[best]+1e-9 {
				best = i
			}
		}
		given[best]++
	}
	return s.Processes[best]
}

func (r *Renderer) unitStream(u Unit, name string) *rand.Rand {
	return stream(r.scene.Seed, "unit", strconv.Itoa(u.Index), name)
}

// showingStream is unitStream for what each showing has anew.
func (r *Renderer) showingStream(u Unit, name string) *rand.Rand {
	return r.unitStream(u, fmt.Sprintf("%s %d", name, u.Identity.Attempt))
}

// layDown draws what holds for the whole unit.
func (r *Renderer) layDown(u *Unit) {
	s := r.scene
	place := r.showingStream(*u, "place")
	u.ShiftXPx = s.Part.MaxShiftPx * (2*place.Float64() - 1)
	u.ShiftYPx = s.Part.MaxShiftPx * (2*place.Float64() - 1)
	if angle := 360 * place.Float64(); s.Part.Turned {
		u.PartAngleDeg = angle
	}
	u.LampPower = s.Lamp.MinPower + (s.Lamp.MaxPower-s.Lamp.MinPower)*r.showingStream(*u, "lamp").Float64()
	u.HazeDN = u.Process.HazeDN.draw(r.unitStream(*u, "haze"))
	u.LayDN = u.Process.Lay.AmplitudeDN.draw(r.unitStream(*u, "lay amplitude"))
}

func (r *Renderer) addObjects(u *Unit, factor float64) {
	on := surface{part: r.scene.Part, camera: r.scene.Camera, hazeDN: u.HazeDN}
	for i, p := range u.Process.Populations {
		draws := r.unitStream(*u, fmt.Sprintf("population %d", i))
		u.Objects = append(u.Objects, p.draw(draws, on, factor)...)
	}
	sin, cos := math.Sincos(u.PartAngleDeg * math.Pi / 180)
	for i := range u.Objects {
		o := &u.Objects[i]
		o.ID = i + 1
		o.UUM, o.VUM = cos*o.PartUUM-sin*o.PartVUM, sin*o.PartUUM+cos*o.PartVUM
		o.AngleDeg = foldDeg(o.AngleDeg - u.PartAngleDeg)
	}
	markIsolated(u.Objects, r.scene.Part, r.scene.Camera.UMPerPx)
}
