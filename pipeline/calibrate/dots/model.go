package dots

import "math"

// The parameters that all frames share, in this order; three follow for each frame: the
// angle of the target and the place of dot (0, 0) in ideal px.
const (
	logStep = iota // natural logarithm of the pitch in px
	k1
	k2
	centreX // of the distortion, from the frame's middle, in norms
	centreY
	shared
)

// model is a way to see the target: which shared parameters are free.
type model struct {
	free [shared]bool
	name string
}

// models lists what is tried, from the plain to the rich.
func models() []model {
	return []model{
		{[shared]bool{logStep: true}, "no distortion"},
		{[shared]bool{logStep: true, k1: true}, "k1"},
		{[shared]bool{logStep: true, k1: true, k2: true}, "k1, k2"},
		{[shared]bool{logStep: true, k1: true, centreX: true, centreY: true}, "k1 and its centre"},
		{[shared]bool{logStep: true, k1: true, k2: true, centreX: true, centreY: true}, "k1, k2 and their centre"},
	}
}

// view is what the fit works on.
type view struct {
	frames  [][]Placed
	middleX float64 // of the frame, px
	middleY float64
	norm    float64   // half of the frame's diagonal, px
	p       []float64 // parameters
	free    []int     // numbers of the free ones
}

func (v *view) pose(frame int) int { return shared + 3*frame }

// project returns where a dot is seen and, when j is not nil, fills in the derivatives of
// (x, y) with respect to the shared parameters and to the pose.
//
//	ideal = t + step·R(angle)·(column, row),  seen = c + (1 + k1ρ² + k2ρ⁴)(ideal − c)
func (v *view) project(frame int, d Placed, j *[2][shared + 3]float64) (x, y float64) {
	pose := v.p[v.pose(frame):]
	sin, cos := math.Sincos(pose[0])
	step := math.Exp(v.p[logStep])
	c, r := float64(d.Column), float64(d.Row)
	ax, ay := step*(cos*c-sin*r), step*(sin*c+cos*r)
	cx, cy := v.middleX+v.norm*v.p[centreX], v.middleY+v.norm*v.p[centreY]
	dx, dy := pose[1]+ax-cx, pose[2]+ay-cy
	n2 := v.norm * v.norm
	rho2 := (dx*dx + dy*dy) / n2
	f := 1 + rho2*(v.p[k1]+rho2*v.p[k2])
	if j != nil {
		bend := (2*v.p[k1] + 4*v.p[k2]*rho2) / n2
		a := [2][2]float64{{f + bend*dx*dx, bend * dx * dy}, {bend * dx * dy, f + bend*dy*dy}}
		for i, to := range [2]float64{dx, dy} {
			j[i] = [shared + 3]float64{
				logStep: a[i][0]*ax + a[i][1]*ay, k1: rho2 * to, k2: rho2 * rho2 * to,
				centreX: -v.norm * a[i][0], centreY: -v.norm * a[i][1],
				shared: -a[i][0]*ay + a[i][1]*ax, shared + 1: a[i][0], shared + 2: a[i][1],
			}
			j[i][centreX+i] += v.norm
		}
	}
	return cx + f*dx, cy + f*dy
}

// squares returns the sum of squared residuals in px².
func (v *view) squares() float64 {
	sum := 0.0
	for i, frame := range v.frames {
		for _, d := range frame {
			x, y := v.project(i, d, nil)
			sum += (d.X-x)*(d.X-x) + (d.Y-y)*(d.Y-y)
		}
	}
	return sum
}

// normal returns JᵀJ and Jᵀe over the free parameters.
func (v *view) normal() (a [][]float64, b []float64) {
	at := map[int]int{}
	for i, k := range v.free {
		at[k] = i
	}
	a, b = make([][]float64, len(v.free)), make([]float64, len(v.free))
	for i := range a {
		a[i] = make([]float64, len(v.free))
	}
	var j [2][shared + 3]float64
	for i, frame := range v.frames {
		for _, d := range frame {
			x, y := v.project(i, d, &j)
			for axis, e := range [2]float64{d.X - x, d.Y - y} {
				for k := range j[axis] {
					row, ok := at[v.number(i, k)]
					if !ok {
						continue
					}
					b[row] += j[axis][k] * e
					for l := range j[axis] {
						if col, ok := at[v.number(i, l)]; ok {
							a[row][col] += j[axis][k] * j[axis][l]
						}
					}
				}
			}
		}
	}
	return a, b
}

// number returns the parameter that stands at place k of a derivative of a frame.
func (v *view) number(frame, k int) int {
	if k < shared {
		return k
	}
	return v.pose(frame) + k - shared
}

// minimise runs Levenberg–Marquardt (Marquardt 1963) and returns the covariance of the
// free parameters for residuals of unit variance; false where they cannot be told apart.
func (v *view) minimise() (covariance [][]float64, ok bool) {
	best, damping := v.squares(), 1e-3
	for range 100 {
		a, b := v.normal()
		for i := range a {
			a[i][i] *= 1 + damping
		}
		inv, fine := inverse(a)
		if !fine {
			return nil, false
		}
		old := append([]float64(nil), v.p...)
		for i, k := range v.free {
			for l := range b {
				v.p[k] += inv[i][l] * b[l]
			}
		}
		now := v.squares()
		if !(now <= best) {
			copy(v.p, old)
			if damping *= 10; damping > 1e12 {
				break
			}
			continue
		}
		done := best-now <= 1e-12*best
		best, damping = now, damping/10
		if done {
			break
		}
	}
	a, _ := v.normal()
	return inverse(a)
}
