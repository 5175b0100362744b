package emva

import "math"

// Stack gathers L frames of one scene for their spatial variance, one at a time.
type Stack struct {
	width, height int
	frames        int
	sum           []uint32 // exact for up to 65 537 frames of 16 bits
	squares       []uint64
	means         []float64 // of each frame
}

// NewStack returns an empty Stack of width × height pixels.
func NewStack(width, height int) *Stack {
	return &Stack{width: width, height: height, sum: make([]uint32, width*height), squares: make([]uint64, width*height)}
}

// Add adds a frame. It panics when the size differs.
func (s *Stack) Add(counts []uint16) {
	if len(counts) != len(s.sum) {
		panic("emva: a stack needs frames of the same size")
	}
	total := uint64(0)
	for i, c := range counts {
		s.sum[i] += uint32(c)
		s.squares[i] += uint64(c) * uint64(c)
		total += uint64(c)
	}
	s.frames++
	s.means = append(s.means, float64(total)/float64(len(counts)))
}

// Spatial is the mean and the spatial variances of a stack, temporal noise taken out.
type Spatial struct {
	Frames      int     `json:"frames"`
	MeanDN      float64 `json:"mean_dn"`
	TemporalDN2 float64 `json:"temporal_variance_dn2"` // of one pixel of one frame
	MeasuredDN2 float64 `json:"measured_variance_dn2"` // of the mean image
	VarianceDN2 float64 `json:"spatial_variance_dn2"`  // measured − temporal / L
	ColumnDN2   float64 `json:"column_variance_dn2"`   // its parts
	RowDN2      float64 `json:"row_variance_dn2"`      //
	PixelDN2    float64 `json:"pixel_variance_dn2"`    //
	LocalDN2    float64 `json:"local_variance_dn2"`    // against the mean of the 5 × 5 about each pixel
}

// Spatial returns the variances of the mean image of L frames:
//
//	s²_y = s²_y.measured − σ²_y.stack / L
//
// σ²_y.stack is the mean temporal variance of a pixel, the variance of the frames' own
// means (a lamp that flickers) taken out. With M rows and N columns, s²_cav and s²_rav
// the variances of the column and row means less σ²_y.stack/(L·M) and /(L·N):
//
//	s²_col   = (MN−M)/(MN−M−N)·s²_cav − N/(MN−M−N)·(s²_y − s²_rav)
//	s²_row   = (MN−N)/(MN−M−N)·s²_rav − M/(MN−M−N)·(s²_y − s²_cav)
//	s²_pixel = MN/(MN−M−N)·(s²_y − s²_cav − s²_rav)
//
// (EMVA Standard 1288, release 4). A variance may come out below 0 where the pattern is
// weaker than its own uncertainty. It panics with fewer than two frames.
func (s *Stack) Spatial() Spatial {
	if s.frames < 2 {
		panic("emva: a spatial variance needs at least two frames")
	}
	return SpatialOf(s.meanImage(), s.width, s.frames, s.temporal())
}

// SpatialOf is Stack.Spatial from the mean image of the frames, row by row of the given
// width, and the temporal variance of one pixel of one frame in DN².
func SpatialOf(mean []float64, width, frames int, temporalDN2 float64) Spatial {
	out := Spatial{Frames: frames, TemporalDN2: temporalDN2}
	height := len(mean) / width
	n, l, m, c := float64(len(mean)), float64(frames), float64(height), float64(width)
	out.MeanDN = average(mean)
	out.MeasuredDN2 = variance(mean, out.MeanDN)
	out.VarianceDN2 = out.MeasuredDN2 - temporalDN2/l
	out.LocalDN2 = neighbourhood(mean, width, height) - temporalDN2/l
	free := n - m - c
	if free <= 0 { // a line has no rows and columns to tell apart
		return out
	}
	cav := variance(columnMeans(mean, width, height), out.MeanDN) - temporalDN2/(l*m)
	rav := variance(rowMeans(mean, width, height), out.MeanDN) - temporalDN2/(l*c)
	out.ColumnDN2 = (n-m)/free*cav - c/free*(out.VarianceDN2-rav)
	out.RowDN2 = (n-c)/free*rav - m/free*(out.VarianceDN2-cav)
	out.PixelDN2 = n / free * (out.VarianceDN2 - cav - rav)
	return out
}

// temporal returns the mean temporal variance of a pixel without common changes.
func (s *Stack) temporal() float64 {
	l := uint64(s.frames)
	total := 0.0
	for i, q := range s.squares {
		sum := uint64(s.sum[i])
		total += float64(l*q - sum*sum)
	}
	pixel := total / float64(l*(l-1)) / float64(len(s.sum))
	common := variance(s.means, average(s.means)) * float64(l) / float64(l-1)
	return max(pixel-common, 0)
}

func (s *Stack) meanImage() []float64 {
	out := make([]float64, len(s.sum))
	for i, v := range s.sum {
		out[i] = float64(v) / float64(s.frames)
	}
	return out
}

func columnMeans(image []float64, width, height int) []float64 {
	out := make([]float64, width)
	for i, v := range image {
		out[i%width] += v / float64(height)
	}
	return out
}

func rowMeans(image []float64, width, height int) []float64 {
	out := make([]float64, height)
	for i, v := range image {
		out[i/width] += v / float64(width)
	}
	return out
}

// neighbourhood returns the variance of the pixels against the mean of their 5 × 5,
// scaled by 25/24 so that a pattern without neighbours alike keeps its variance. Light
// fall-off drops out.
func neighbourhood(image []float64, width, height int) float64 {
	const reach, count = 2, 25
	total, n := 0.0, 0.0
	for y := reach; y < height-reach; y++ {
		for x := reach; x < width-reach; x++ {
			sum := 0.0
			for v := y - reach; v <= y+reach; v++ {
				for _, p := range image[v*width+x-reach : v*width+x+reach+1] {
					sum += p
				}
			}
			d := image[y*width+x] - sum/count
			total += d * d
			n++
		}
	}
	if n == 0 {
		return 0
	}
	return total / n * count / (count - 1)
}

func average(v []float64) float64 {
	sum := 0.0
	for _, x := range v {
		sum += x
	}
	return sum / float64(len(v))
}

func variance(v []float64, mean float64) float64 {
	sum := 0.0
	for _, x := range v {
		sum += (x - mean) * (x - mean)
	}
	return sum / float64(len(v))
}

// DSNU returns the dark signal non-uniformity in electrons, √s²_y.dark / K; NaN where
// the variance is below 0.
func DSNU(darkVariance, gain float64) float64 { return math.Sqrt(darkVariance) / gain }

// PRNU returns the photo response non-uniformity in percent,
// 100·√(s²_y − s²_y.dark) / (μ_y − μ_y.dark); NaN where the variance is below 0. The
// standard wants light at half of saturation that is even to a few percent: light fall-off counts.
func PRNU(bright, dark, brightMean, darkMean float64) float64 {
	return 100 * math.Sqrt(bright-dark) / (brightMean - darkMean)
}
