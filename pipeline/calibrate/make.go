package calibrate

import (
	"iter"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate/dots"
	"lapgate/pipeline/calibrate/emva"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
)

// Request says what is calibrated and how the camera was set.
type Request struct {
	Camera, Light, Mode string
	Capture             pipeline.Capture // format and size may be zero: they are then the first dark frame's
	Scale               pipeline.Scale
	MadeAt              string // RFC 3339, given by the caller
	Rules               Rules

	Certificate     dots.Certificate // of the dot target
	SizingDiameters [][]float64      // µm, of the sizing target's dots row by row from the top; 0 = no dot there
	Patch           *pipeline.Box    // the reference patch; nil = none
	Part            PartSearch       // how to find the conforming part
}

// Inputs are the frames of each kind. Stray and Response may be nil: none was taken.
// A mirror gives no response image; without one, and without a ramp, K is unknown. So may be the rest: pairs of
// frames at rising exposures, frames of a dot target, of a target with dots of known
// diameters, and of a conforming part.
type Inputs struct {
	Dark, Stray, Response iter.Seq2[Frame, error]
	Ramp                  []RampStep
	Dots, Sizing, Part    iter.Seq2[Frame, error]
}

// Made is a calibration and what it was made from.
type Made struct {
	Calibration *pipeline.Calibration
	Provenance  Provenance
}

// Provenance says what a calibration was made from.
type Provenance struct {
	Frames     []SourceFrame `json:"frames"`
	NormDN     float64       `json:"response_norm_dn"` // mean of response − dark over good pixels; 0 = no response
	GainLevels int           `json:"gain_levels"`      // tiles from which K was fitted
	Bad        BadCounts     `json:"bad_pixel_reasons"`

	PhotonTransfer  []emva.Level  `json:"photon_transfer,omitempty"`        // of tiles of the response frames, above dark
	ResponseGain    float64       `json:"response_gain_dn_per_e,omitempty"` // K by those, where a ramp gave the K in force
	DarkPattern     *emva.Spatial `json:"dark_pattern,omitempty"`
	ResponsePattern *emva.Spatial `json:"response_pattern,omitempty"`
	Ramp            *Ramp         `json:"ramp,omitempty"`
	Target          *dots.Scale   `json:"dot_target,omitempty"`
	SizingDots      []dots.Known  `json:"sizing_dots,omitempty"`
}

// Folders names the folders of frames; all but Dark may be empty.
type Folders struct{ Dark, Stray, Response, Ramp, Dots, Sizing, Part string }

// FromFolders makes a calibration from folders of frames; see Folder for what one may
// hold, and Make.
func FromFolders(req Request, in Folders, o files.Options) (Made, error) {
	open := func(dir string) iter.Seq2[Frame, error] {
		if dir == "" {
			return nil
		}
		return Folder(dir, req.Capture, o)
	}
	inputs := Inputs{Dark: open(in.Dark), Stray: open(in.Stray), Response: open(in.Response),
		Dots: open(in.Dots), Sizing: open(in.Sizing), Part: open(in.Part)}
	if in.Ramp != "" {
		ramp, err := RampFolder(in.Ramp, req.Capture, o)
		if err != nil {
			return Made{}, err
		}
		inputs.Ramp = ramp
	}
	return Make(req, inputs)
}

// Make makes a calibration. It refuses frames that are saturated, clipped, too few,
// unequal, copied, moving or unsteady, a response that is too dark or darker than
// dark, and too many bad pixels; the error names kind, file and what to do.
//
// Noise: dark variance is the median over 32 × 32 tiles of the two-frame variance; K
// is the slope through the origin over the tiles of the response pairs up to
// Rules.LinearShare of full scale, or over all tiles if none is that dark. A tile's
// variance is taken about its own mean difference, so a flickering lamp drops out. A
// ramp gives K by EMVA Standard 1288 instead.
func Make(req Request, in Inputs) (Made, error) {
	b := builder{req: req, cal: &pipeline.Calibration{
		Camera: req.Camera, Light: req.Light, Mode: req.Mode, Scale: req.Scale, MadeAt: req.MadeAt,
	}}
	if err := b.checkRequest(in); err != nil {
		return Made{}, err
	}
	for _, seq := range []*iter.Seq2[Frame, error]{&in.Dark, &in.Stray, &in.Response, &in.Dots, &in.Sizing, &in.Part} {
		*seq = b.temperature.watch(*seq)
	}
	for _, step := range []func(Inputs) error{b.dark, b.response, b.stray, b.ramp, b.finish, b.dots, b.sizing, b.part, b.patch, b.pattern} {
		if err := step(in); err != nil {
			return Made{}, err
		}
	}
	b.cal.Sensor = b.temperature.seen()
	made := Made{Calibration: b.cal, Provenance: b.from}
	hash, err := hashOf(made)
	b.cal.Hash = hash
	return made, err
}

// builder carries the parts of a calibration from step to step.
type builder struct {
	req   Request
	cal   *pipeline.Calibration
	from  Provenance
	level emva.Level // dark
	gain  float64
	bad   badSet
	raw   *raster.Plane // response in DN
	local *raster.Plane // its local median

	darkAgainst *raster.Plane // dark less its local median
	temperature thermometer
}

func (b *builder) checkRequest(in Inputs) error {
	switch r := b.req; {
	case in.Dark == nil:
		return pipeline.Invalid("dark: no frames given, want at least %d with the lamp off", r.Rules.MinFrames)
	case r.Rules.MinFrames < 2 || r.Rules.MaxFrames > 10000:
		return pipeline.Invalid("rules: got %d to %d frames, want 2 to 10000: start from DefaultRules", r.Rules.MinFrames, r.Rules.MaxFrames)
	case !(r.Capture.ExposureUS > 0):
		return pipeline.Invalid("exposure_us: got %g, want the exposure of the frames", r.Capture.ExposureUS)
	case in.Dots != nil:
		return b.checkTarget()
	case !(r.Scale.UMPerPx > 0) || math.IsInf(r.Scale.UMPerPx, 0):
		return pipeline.Invalid("um_per_px: got %g, want the size of a pixel on the part", r.Scale.UMPerPx)
	case r.Scale.Source == "":
		return pipeline.Invalid("scale source: not given, want \"stated\" or serial and date of the target's certificate")
	}
	return b.checkNames()
}

func (b *builder) checkNames() error {
	for _, id := range [][2]string{{"camera", b.req.Camera}, {"light", b.req.Light}, {"mode", b.req.Mode}} {
		if err := pipeline.CheckID(id[0], id[1]); err != nil {
			return err
		}
	}
	return nil
}

func (b *builder) dark(in Inputs) error {
	s, err := gather("dark", scene{rules: b.req.Rules}, in.Dark, b.req.Capture)
	if err != nil {
		return err
	}
	b.cal.Capture = s.capture
	b.cal.Capture.BinningX, b.cal.Capture.BinningY = max(s.capture.BinningX, 1), max(s.capture.BinningY, 1)
	b.cal.Dark = s.mean()
	b.level = s.darkLevel()
	b.from.Frames = append(b.from.Frames, s.files...)
	b.from.DarkPattern = s.spatial()
	b.bad.mask = raster.NewMask(s.width, s.height)
	b.bad.saturated(s.saturated)
	b.darkAgainst = minus(b.cal.Dark, localMedian(b.cal.Dark))
	b.bad.hot(b.darkAgainst, math.Sqrt(max(b.level.VarianceDN2, emva.MinDarkVariance)/float64(len(s.files))), b.req.Rules)
	b.bad.noisy(s, b.level.VarianceDN2)
	return nil
}

func (b *builder) response(in Inputs) error {
	if in.Response == nil {
		return nil
	}
	s, err := gather("response", scene{dark: b.level, lit: true, rules: b.req.Rules}, in.Response, b.cal.Capture)
	if err != nil {
		return err
	}
	b.raw = minus(s.mean(), b.cal.Dark)
	if err := b.checkBright(s.files); err != nil {
		return err
	}
	b.from.Frames = append(b.from.Frames, s.files...)
	b.from.ResponsePattern = s.spatial()
	b.bad.saturated(s.saturated)
	b.local = localMedian(b.raw)
	b.bad.response(b.raw, b.local, medianOf(b.raw), b.req.Rules)
	return b.fitGain(s)
}

func (b *builder) checkBright(used []SourceFrame) error {
	mean, full := meanOf(b.raw), float64(b.cal.Capture.Format.MaxCount())
	if mean <= 0 {
		return pipeline.Invalid("response: mean of %s to %s is %.2f DN below dark: the folders are exchanged, or the lamp was off",
			used[0].File, used[len(used)-1].File, -mean)
	}
	if want := b.req.Rules.MinResponseShare * full; mean < want {
		return pipeline.Invalid("response: mean of %s to %s is %.2f DN above dark, want at least %.2f (%.3g %% of full scale): more light, or state the significant bits if full scale is less than %s says",
			used[0].File, used[len(used)-1].File, mean, want, 100*b.req.Rules.MinResponseShare, b.cal.Capture.Format)
	}
	return nil
}

func (b *builder) fitGain(s *stack) error {
	all := s.tileLevels()
	b.from.PhotonTransfer = transferPoints(all, b.level)
	limit := b.req.Rules.LinearShare * float64(b.cal.Capture.Format.MaxCount())
	var linear []emva.Level
	for _, l := range all {
		if l.MeanDN <= limit {
			linear = append(linear, l)
		}
	}
	if len(linear) == 0 {
		linear = all
	}
	gain, err := emva.SystemGain(linear, []emva.Level{b.level})
	if err != nil {
		return pipeline.Invalid("response: %w", err)
	}
	b.gain, b.from.GainLevels = gain, len(linear)
	return nil
}

func (b *builder) stray(in Inputs) error {
	if in.Stray == nil {
		return nil
	}
	s, err := gather("stray", scene{dark: b.level, gain: b.gain, lit: true, rules: b.req.Rules}, in.Stray, b.cal.Capture)
	if err != nil {
		return err
	}
	b.bad.saturated(s.saturated)
	b.from.Frames = append(b.from.Frames, s.files...)
	b.cal.Stray = minus(s.mean(), b.cal.Dark)
	level := meanOf(b.cal.Stray)
	if level < -max(1, math.Sqrt(b.level.VarianceDN2)) {
		return pipeline.Invalid("stray: mean is %.2f DN below dark: the folders are exchanged, or the camera was not warm", -level)
	}
	if b.raw != nil && level >= meanOf(b.raw) {
		return pipeline.Invalid("stray: mean %.2f DN above dark is not below the response's %.2f: the folders are exchanged", level, meanOf(b.raw))
	}
	return nil
}

func (b *builder) finish(Inputs) error {
	b.cal.BadPixels = b.bad.list()
	b.from.Bad = b.bad.counts
	b.cal.Noise = noiseModel(b.gain, b.level.VarianceDN2)
	n, most := len(b.cal.BadPixels), b.req.Rules.MaxBadShare*float64(len(b.bad.mask.Bits))
	if float64(n) > most {
		return pipeline.Invalid("bad pixels: got %d, want at most %.0f (%+v): the target must fill the field, clean and in defocus; or the camera is faulty",
			n, most, b.bad.counts)
	}
	if b.raw != nil {
		b.normalise()
	}
	return nil
}

// normalise divides by the mean over good pixels. A bad pixel gets its local median,
// at least DeadShare of the mean, so that dividing by the response is always safe.
func (b *builder) normalise() {
	var sum float64
	for i, v := range b.raw.Pix {
		if !b.bad.mask.Bits[i] {
			sum += float64(v)
		}
	}
	norm := sum / float64(len(b.raw.Pix)-len(b.cal.BadPixels))
	out := raster.NewPlane(b.raw.Width, b.raw.Height)
	for i, v := range b.raw.Pix {
		if b.bad.mask.Bits[i] {
			v = max(b.local.Pix[i], float32(b.req.Rules.DeadShare*norm))
		}
		out.Pix[i] = float32(float64(v) / norm)
	}
	b.cal.Response, b.from.NormDN = out, norm
}

func meanOf(p *raster.Plane) float64 {
	var sum float64
	for _, v := range p.Pix {
		sum += float64(v)
	}
	return sum / float64(len(p.Pix))
}
