package calibrate

import (
	"cmp"
	"math"
	"slices"

	"lapgate/pipeline"
)

// patternPixels is how many pixels of the fixed pattern are kept: half of them those
// that stand out most in the dark, half in the light.
const patternPixels = 512

// pattern keeps the pixels that stand out of their 5 × 5 neighbours most, as far as they
// do so by five times the noise of the mean of the frames.
func (b *builder) pattern(Inputs) error {
	dark := b.darkAgainst
	response := make([]float32, len(dark.Pix))
	if b.raw != nil {
		for i, v := range b.raw.Pix {
			if l := b.local.Pix[i]; l > 0 {
				response[i] = v/l - 1
			}
		}
	}
	noise := b.cal.Noise.DarkDN
	kept := map[int]bool{}
	for _, i := range strongest(dark.Pix, float32(5*noise/math.Sqrt(float64(b.from.DarkPattern.Frames)))) {
		kept[i] = true
	}
	if b.raw != nil {
		level := medianOf(b.raw)
		shot := math.Sqrt(noise*noise+b.gain*level) / level / math.Sqrt(float64(b.from.ResponsePattern.Frames))
		for _, i := range strongest(response, float32(5*shot)) {
			kept[i] = true
		}
	}
	for i := range kept {
		b.cal.FixedPattern = append(b.cal.FixedPattern, pipeline.PatternPixel{X: i % dark.Width, Y: i / dark.Width,
			DarkDN: rounded(dark.Pix[i]), Response: rounded(response[i])})
	}
	slices.SortFunc(b.cal.FixedPattern, func(a, c pipeline.PatternPixel) int { return cmp.Or(a.Y-c.Y, a.X-c.X) })
	return nil
}

// strongest returns the numbers of up to half of patternPixels values whose size is at least
// least, the largest first.
func strongest(v []float32, least float32) []int {
	var at []int
	for i, x := range v {
		if max(x, -x) >= least {
			at = append(at, i)
		}
	}
	slices.SortStableFunc(at, func(a, b int) int { return cmp.Compare(max(v[b], -v[b]), max(v[a], -v[a])) })
	return at[:min(len(at), patternPixels/2)]
}

// rounded keeps what means something, so that the document stays readable.
func rounded(v float32) float64 { return math.Round(1e4*float64(v)) / 1e4 }
