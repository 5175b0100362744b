package lines

import "math"

// The error function from a table of cubics, to 3e-9 and in a fraction of the time of
// math.Erf: most of the time of fitting a profile goes there.
const (
	erfSteps = 64  // of the table for each 1
	erfMost  = 4.5 // beyond it lies 2e-10
)

var erfTable = newErfTable()

// newErfTable has the cubics of value and slope at both ends of each step (Hermite).
func newErfTable() *[erfMost * erfSteps][4]float64 {
	t := &[erfMost * erfSteps][4]float64{}
	slope := func(x float64) float64 { return 2 / math.Sqrt(math.Pi) * math.Exp(-x*x) / erfSteps }
	for i := range t {
		a, b := float64(i)/erfSteps, float64(i+1)/erfSteps
		rise, p, q := math.Erf(b)-math.Erf(a), slope(a), slope(b)
		t[i] = [4]float64{math.Erf(a), p, 3*rise - 2*p - q, p + q - 2*rise}
	}
	return t
}

func erf(x float64) float64 {
	a := math.Abs(x) * erfSteps
	if !(a < erfMost*erfSteps) {
		return math.Copysign(1, x)
	}
	i := int(a)
	c, t := &erfTable[i], a-float64(i)
	return math.Copysign(((c[3]*t+c[2])*t+c[1])*t+c[0], x)
}
