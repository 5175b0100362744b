package calibrate

import (
	"errors"
	"fmt"
	"iter"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate/emva"
	"lapgate/pipeline/raster"
)

// stack is what is kept of the frames of one kind while they come, one at a time.
type stack struct {
	kind          string
	scene         scene
	width, height int
	capture       pipeline.Capture
	files         []SourceFrame
	sum           []uint32 // exact for up to 65 537 frames of 16 bits
	squares       []uint64 // of the counts; kept for dark frames only
	saturated     []bool   // in any frame
	first, last   []uint16
	pairs         []emva.Level // of each two frames in a row
	tiles         [][]tile     // of the same pairs
}

// gather takes all frames of one kind and refuses the first that does not fit.
func gather(kind string, s scene, frames iter.Seq2[Frame, error], want pipeline.Capture) (*stack, error) {
	st := &stack{kind: kind, scene: s, capture: want}
	for f, err := range frames {
		if err != nil {
			return nil, pipeline.Invalid("%s: %w", kind, err)
		}
		if err := st.add(f); err != nil {
			return nil, pipeline.Invalid("%s: %s: %w", kind, f.Name, err)
		}
	}
	if n := len(st.files); n < s.rules.MinFrames {
		return nil, pipeline.Invalid("%s: got %d frames, want at least %d: take more", kind, n, s.rules.MinFrames)
	}
	return st, nil
}

func (s *stack) add(f Frame) error {
	if len(s.files) == s.scene.rules.MaxFrames {
		return fmt.Errorf("more than %d frames: leave some out", s.scene.rules.MaxFrames)
	}
	if err := s.sameCapture(f); err != nil {
		return err
	}
	counts, err := f.Raw.Counts()
	if err != nil {
		return err
	}
	if s.first == nil {
		s.start(f, counts)
	}
	if err := s.checkEnds(counts, f.Raw.Format.MaxCount()); err != nil {
		return err
	}
	if len(s.files) > 0 {
		if err := s.compare(counts); err != nil {
			return err
		}
	}
	s.accumulate(counts)
	s.files = append(s.files, sourceFrame(s.kind, f))
	return nil
}

func (s *stack) start(f Frame, counts []uint16) {
	s.width, s.height = f.Raw.Width, f.Raw.Height
	s.first, s.last = counts, counts
	s.sum = make([]uint32, len(counts))
	s.saturated = make([]bool, len(counts))
	if !s.scene.lit {
		s.squares = make([]uint64, len(counts))
	}
}

// sameCapture compares with the settings wanted; size and format of the very first
// frame become part of them.
func (s *stack) sameCapture(f Frame) error {
	got := f.Capture
	got.Format, got.Width, got.Height = f.Raw.Format, f.Raw.Width, f.Raw.Height
	if s.capture.Width == 0 {
		s.capture.Format, s.capture.Width, s.capture.Height = got.Format, got.Width, got.Height
	}
	if err := pipeline.MatchCapture(s.capture, got); err != nil {
		return fmt.Errorf("%w: all frames of a calibration are taken with the same settings", err)
	}
	return nil
}

// checkEnds refuses counts at full scale and, in the dark, at zero.
func (s *stack) checkEnds(counts []uint16, full int) error {
	var high, low int
	for i, c := range counts {
		if int(c) >= full {
			high++
			s.saturated[i] = true
		}
		if c == 0 {
			low++
		}
	}
	n, r := float64(len(counts)), s.scene.rules
	if share := float64(high) / n; share > r.SaturatedShare {
		return fmt.Errorf("saturated: %d pixels (%.3g %%) at full scale %d, want at most %.3g %%: less light, exposure or gain",
			high, 100*share, full, 100*r.SaturatedShare)
	}
	if share := float64(low) / n; !s.scene.lit && share > r.ClippedShare {
		return fmt.Errorf("clipped: %d pixels (%.3g %%) at 0, want at most %.3g %%: raise the camera's black level",
			low, 100*share, 100*r.ClippedShare)
	}
	return nil
}

func (s *stack) compare(counts []uint16) error {
	if err := s.scene.checkSteady(s.first, counts, s.width, tilesOf(s.first, counts, s.width, s.height)); err != nil {
		return fmt.Errorf("against %s: %w", s.files[0].File, err)
	}
	level := emva.Pair(s.last, counts)
	if level.VarianceDN2 == 0 {
		return errors.New("same pixels as the frame before, want a new capture: a copied frame has no noise")
	}
	s.pairs = append(s.pairs, level)
	s.tiles = append(s.tiles, tilesOf(s.last, counts, s.width, s.height))
	return nil
}

func (s *stack) accumulate(counts []uint16) {
	for i, c := range counts {
		s.sum[i] += uint32(c)
	}
	for i := range s.squares {
		s.squares[i] += uint64(counts[i]) * uint64(counts[i])
	}
	s.last = counts
}

// mean returns the mean of the frames in DN.
func (s *stack) mean() *raster.Plane {
	p := raster.NewPlane(s.width, s.height)
	n := float64(len(s.files))
	for i, v := range s.sum {
		p.Pix[i] = float32(float64(v) / n)
	}
	return p
}

// tileLevels returns mean and temporal variance of each tile, over all pairs.
func (s *stack) tileLevels() []emva.Level {
	out := make([]emva.Level, len(s.tiles[0]))
	n := float64(len(s.tiles))
	for _, pair := range s.tiles {
		for i, t := range pair {
			out[i].MeanDN += t.mean / n
			out[i].VarianceDN2 += t.variance / n
		}
	}
	return out
}

// darkLevel returns the median over the tiles, which a few noisy pixels do not move.
func (s *stack) darkLevel() emva.Level {
	var means, vars []float64
	for _, l := range s.tileLevels() {
		means = append(means, l.MeanDN)
		vars = append(vars, l.VarianceDN2)
	}
	return emva.Level{MeanDN: median(means), VarianceDN2: median(vars)}
}

// spatial returns the variances of the mean image over the pixels, bad ones too.
func (s *stack) spatial() *emva.Spatial {
	mean := make([]float64, len(s.sum))
	for i, v := range s.sum {
		mean[i] = float64(v) / float64(len(s.files))
	}
	temporal := 0.0
	for _, p := range s.pairs {
		temporal += p.VarianceDN2 / float64(len(s.pairs))
	}
	out := emva.SpatialOf(mean, s.width, len(s.files), temporal)
	return &out
}
