package dots

import (
	"fmt"
	"math"

	"lapgate/pipeline"
)

// Certificate is what is known of a target.
type Certificate struct {
	Serial        string  `json:"serial"`
	Date          string  `json:"date"` // YYYY-MM-DD
	PitchUM       float64 `json:"pitch_um"`
	UncertaintyUM float64 `json:"uncertainty_um"` // standard uncertainty of the pitch: half of the one stated at k = 2
}

// Residual is how far a dot was found from where the fit puts it.
type Residual struct {
	X  float64 `json:"x_px"`
	Y  float64 `json:"y_px"`
	DX float64 `json:"dx_px"`
	DY float64 `json:"dy_px"`
}

// Scale is what a dot target says of scale and distortion.
type Scale struct {
	Certificate              Certificate          `json:"certificate"`
	UMPerPx                  float64              `json:"um_per_px"` // at the centre of the distortion
	UncertaintyUM            float64              `json:"um_per_px_uncertainty"`
	FitUncertaintyUM         float64              `json:"fit_uncertainty_um"`         // its part from the scatter of the dots
	CertificateUncertaintyUM float64              `json:"certificate_uncertainty_um"` // and from the pitch
	RotationDeg              []float64            `json:"rotation_deg"`               // of the target in each frame, from +x towards +y, −45 to 45
	Distortion               *pipeline.Distortion `json:"distortion,omitempty"`       // nil = none that the dots show
	K1Uncertainty            float64              `json:"k1_uncertainty"`
	K2Uncertainty            float64              `json:"k2_uncertainty"`
	Method                   string               `json:"method"`
	Frames                   int                  `json:"frames"`
	Dots                     int                  `json:"dots"`
	LeftOut                  int                  `json:"left_out"`     // dots further off than chance allows
	FieldShare               float64              `json:"field_share"`  // of the frame, within the outermost dots
	RMSPx                    float64              `json:"rms_px"`       // of the residuals, both axes together
	PlainRMSPx               float64              `json:"plain_rms_px"` // without distortion
	MaxPx                    float64              `json:"max_px"`
	Residuals                []Residual           `json:"residuals,omitempty"`
}

// keptResiduals is how many residuals are kept to be looked at.
const keptResiduals = 400

// FitScale fits scale, distortion and the target's place in each frame to the dots of one
// or more frames of width × height pixels, by least squares in the picture (Brown's radial
// model, Levenberg–Marquardt). Of no distortion, k1, k1 and k2, each with the centre in
// the frame's middle or free, it takes the model with the smallest Bayesian information
// criterion (Schwarz 1978). Dots further off than 6 robust sigmas are left out.
func FitScale(frames [][]Placed, c Certificate, width, height int) (Scale, error) {
	if !(c.PitchUM > 0) || !(c.UncertaintyUM >= 0) {
		return Scale{}, pipeline.Invalid("dot target: got a pitch of %g ± %g µm, want the certificate's", c.PitchUM, c.UncertaintyUM)
	}
	best, plain, err := choose(frames, width, height)
	if err != nil {
		return Scale{}, err
	}
	kept, left := best.inliers()
	if left > 0 {
		if best, plain, err = choose(kept, width, height); err != nil {
			return Scale{}, err
		}
	}
	out := best.scale(c)
	out.LeftOut, out.PlainRMSPx = left, plain.rms()
	out.FieldShare = fieldShare(kept, width, height)
	if out.Distortion != nil {
		if err := out.Distortion.Check(math.Hypot(float64(width), float64(height)) / 2); err != nil {
			return Scale{}, err
		}
	}
	return out, nil
}

// fit is a view after its minimum was found.
type fit struct {
	view
	model      model
	covariance [][]float64 // of the free parameters
	sum        float64     // of squared residuals, px²
	n          int         // coordinates
}

// rms returns the root mean square residual of one coordinate, by degrees of freedom.
func (f *fit) rms() float64 { return math.Sqrt(f.sum / float64(max(f.n-len(f.free), 1))) }

func (f *fit) criterion() float64 {
	n := float64(f.n)
	return n*math.Log(max(f.sum, 1e-12*n)/n) + float64(len(f.free))*math.Log(n)
}

func choose(frames [][]Placed, width, height int) (best, plain *fit, err error) {
	for _, m := range models() {
		f, ok := fitModel(frames, m, width, height, best)
		if !ok {
			continue
		}
		if plain == nil {
			plain = f
		}
		if best == nil || f.criterion() < best.criterion() {
			best = f
		}
	}
	if best == nil {
		return nil, nil, fmt.Errorf("dot target: no scale fits the dots")
	}
	return best, plain, nil
}

func fitModel(frames [][]Placed, m model, width, height int, from *fit) (*fit, bool) {
	f := &fit{model: m}
	f.frames = frames
	f.middleX, f.middleY = float64(width-1)/2, float64(height-1)/2
	f.norm = math.Hypot(float64(width), float64(height)) / 2
	f.p = startOf(frames)
	if from != nil {
		copy(f.p, from.p)
	}
	for k, free := range m.free {
		if free {
			f.free = append(f.free, k)
		} else {
			f.p[k] = 0
		}
	}
	for i := range frames {
		f.free = append(f.free, f.pose(i), f.pose(i)+1, f.pose(i)+2)
		f.n += 2 * len(frames[i])
	}
	if f.n <= len(f.free) {
		return nil, false
	}
	var ok bool
	f.covariance, ok = f.minimise()
	f.sum = f.squares()
	return f, ok
}

// startOf takes step, angle and place of each frame from the similarity that fits best:
// with z the places and w the grid as complex numbers about their means, Σ z·w̄ / Σ |w|².
func startOf(frames [][]Placed) []float64 {
	p := make([]float64, shared+3*len(frames))
	for i, frame := range frames {
		var zm, wm, num complex128
		n := complex(float64(len(frame)), 0)
		for _, d := range frame {
			zm, wm = zm+complex(d.X, d.Y)/n, wm+complex(float64(d.Column), float64(d.Row))/n
		}
		den := 0.0
		for _, d := range frame {
			w := complex(float64(d.Column), float64(d.Row)) - wm
			num += (complex(d.X, d.Y) - zm) * complex(real(w), -imag(w))
			den += real(w)*real(w) + imag(w)*imag(w)
		}
		a := num / complex(den, 0)
		t := zm - a*wm
		p[logStep] += math.Log(math.Hypot(real(a), imag(a))) / float64(len(frames))
		p[shared+3*i], p[shared+3*i+1], p[shared+3*i+2] = math.Atan2(imag(a), real(a)), real(t), imag(t)
	}
	return p
}

// inliers leaves out dots further off than 6 robust sigmas (of a normal distribution of
// two coordinates: the median distance is 1.1774 sigma), but never those within 0.05 px.
func (f *fit) inliers() (kept [][]Placed, left int) {
	var all []float64
	for i, frame := range f.frames {
		for _, d := range frame {
			x, y := f.project(i, d, nil)
			all = append(all, math.Hypot(d.X-x, d.Y-y))
		}
	}
	limit := max(6*median(all)/1.1774, 0.05)
	k := 0
	for _, frame := range f.frames {
		var fine []Placed
		for _, d := range frame {
			if all[k] <= limit {
				fine = append(fine, d)
			} else {
				left++
			}
			k++
		}
		kept = append(kept, fine)
	}
	return kept, left
}

// sigma returns the standard uncertainty of a parameter; 0 where it is not free.
func (f *fit) sigma(parameter int) float64 {
	for i, k := range f.free {
		if k == parameter {
			return f.rms() * math.Sqrt(max(f.covariance[i][i], 0))
		}
	}
	return 0
}

func (f *fit) scale(c Certificate) Scale {
	s := Scale{Certificate: c, UMPerPx: c.PitchUM / math.Exp(f.p[logStep]), Frames: len(f.frames), RMSPx: f.rms(),
		Method: "Brown's radial model, least squares in the picture (Levenberg–Marquardt), model by information criterion: " + f.model.name}
	s.FitUncertaintyUM = s.UMPerPx * f.sigma(logStep)
	s.CertificateUncertaintyUM = s.UMPerPx * c.UncertaintyUM / c.PitchUM
	s.UncertaintyUM = math.Hypot(s.FitUncertaintyUM, s.CertificateUncertaintyUM)
	if f.model.free[k1] {
		s.Distortion = &pipeline.Distortion{K1: f.p[k1], K2: f.p[k2], NormPx: f.norm,
			CentreX: f.middleX + f.norm*f.p[centreX], CentreY: f.middleY + f.norm*f.p[centreY]}
		s.K1Uncertainty, s.K2Uncertainty = f.sigma(k1), f.sigma(k2)
	}
	for i, frame := range f.frames {
		s.RotationDeg = append(s.RotationDeg, f.p[f.pose(i)]*180/math.Pi)
		s.Dots += len(frame)
		for _, d := range frame {
			x, y := f.project(i, d, nil)
			s.MaxPx = max(s.MaxPx, math.Hypot(d.X-x, d.Y-y))
			s.Residuals = append(s.Residuals, Residual{d.X, d.Y, d.X - x, d.Y - y})
		}
	}
	s.Residuals = thin(s.Residuals, keptResiduals)
	return s
}

func thin(r []Residual, most int) []Residual {
	step := (len(r) + most - 1) / most
	if step <= 1 {
		return r
	}
	var out []Residual
	for i := 0; i < len(r); i += step {
		out = append(out, r[i])
	}
	return out
}

func fieldShare(frames [][]Placed, width, height int) float64 {
	x0, y0, x1, y1 := float64(width), float64(height), 0.0, 0.0
	for _, frame := range frames {
		for _, d := range frame {
			x0, y0, x1, y1 = min(x0, d.X), min(y0, d.Y), max(x1, d.X), max(y1, d.Y)
		}
	}
	return max(x1-x0, 0) * max(y1-y0, 0) / float64(width*height)
}
