package fused

// #include <stdlib.h>
// #include "objects.h"
import "C"

import (
	"fmt"
	"math"
	"runtime"
	"slices"
	"sync"
	"unsafe"

	"lapgate/pipeline/raster"
)

// Blob is a blob with its pixels.
type Blob struct {
	raster.Blemish
	Spans []raster.Span // row by row from the top, left to right
}

// Result is what Find found.
type Result struct {
	Blobs       []Blob // in the order of their first pixel, row by row
	Truncated   bool   // there were more than Settings.MaxBlobs
	Grid        *raster.Grid
	Saturated   []raster.Span // pixels at the top of the format's range, in and just around the region
	SNR         *raster.Plane // only with Settings.SNR
	Floats      bool          // 16-bit integers did not do
	RowsAgain   int           // grid rows passed twice, because the first look misjudged level or noise
	MemoryBytes int64         // most taken in C at a time for this frame, beside the frame and the correction
}

// Whole returns the region that is all of a frame.
func Whole(width, height int) []raster.Span {
	out := make([]raster.Span, height)
	for y := range out {
		out[y] = raster.Span{Y: y, X1: width}
	}
	return out
}

// Find looks for blobs in the region of a frame; its spans may overlap. The
// result equals that of raster's MeasureGrid, MatchedFilter, SNR, Label and Measurer but
// for the last digits, and does not depend on Settings.Bands. The error says what is
// wrong with frame or settings.
func (c *Correction) Find(raw raster.Raw, region []raster.Span, s Settings) (*Result, error) {
	if err := raw.Check(); err != nil {
		return nil, err
	}
	if raw.Format != c.format || raw.Width != c.width || raw.Height != c.height {
		return nil, fmt.Errorf("frame: got %s of %d × %d px, the correction is for %s of %d × %d", raw.Format, raw.Width, raw.Height,
			c.format, c.width, c.height)
	}
	if err := s.Check(); err != nil {
		return nil, err
	}
	j := newJob(c, raw, region, s)
	defer j.pin.Unpin()
	if err := j.takeGuess(); err != nil {
		return nil, err
	}
	defer j.dropGuess()
	float := !c.integer
	fits, err := j.look(float)
	if err == nil && !fits {
		float = true
		_, err = j.look(true)
	}
	if err == nil {
		err = j.pass()
	}
	if err != nil {
		return nil, explain(err, raw)
	}
	defer c.bands.put(j.bands)
	return j.objects()
}

// explain names the pixel where a count was too high.
func explain(err error, raw raster.Raw) error {
	if err == errCount {
		if named := raw.CheckCounts(); named != nil {
			return named
		}
	}
	return err
}

// job is one call of Find.
type job struct {
	c          *Correction
	s          Settings
	pin        runtime.Pinner
	frame      *C.pg_frame
	rows       int // of the grid
	guess      *grid
	grid       *grid
	inside     []int // an int is an int64_t here: see grid.go
	valid      []int
	bands      []*band
	guessBytes int64 // taken in C for the grid of the first look
	blockBytes int64 // taken in C for the first look, and given back after it
}

func newJob(c *Correction, raw raster.Raw, region []raster.Span, s Settings) *job {
	j := &job{c: c, s: s, frame: &C.pg_frame{}}
	f := j.frame
	f.data, f.stride = (*C.uint8_t)(pinned(j, raw.Data)), C.int64_t(raw.Stride)
	f.width, f.height, f.max_count = C.int32_t(c.width), C.int32_t(c.height), C.int32_t(c.format.MaxCount())
	f.layout = layouts[c.format]
	f.offset, f.gain = (*C.int16_t)(pinned(j, c.offset)), (*C.int16_t)(pinned(j, c.gain))
	f.dark, f.stray, f.response = (*C.float)(pinned(j, c.dark)), (*C.float)(pinned(j, c.stray)), (*C.float)(pinned(j, c.response))
	f.bad_near = (*C.uint8_t)(pinned(j, c.badNear))
	f.bad_start, f.bad_x = (*C.int32_t)(pinned(j, c.badStart)), (*C.int32_t)(pinned(j, c.badX))
	spans, start := byRow(region, c.width, c.height)
	f.spans, f.span_start = (*C.pg_span)(pinned(j, spans)), (*C.int32_t)(pinned(j, start))
	f.factor, f.polarity, f.cell = C.int32_t(c.factor), C.int32_t(s.Polarity), C.int32_t(s.Grid.CellPx)
	f.clip, f.shrink, f.floor_dn = C.double(s.Grid.ClipSigma), C.double(truncation(s.Grid.ClipSigma)), C.double(s.Grid.FloorDN)
	f.min_share, f.low, f.high = C.double(s.Grid.MinShare), C.double(s.Low), C.double(s.High)
	if s.Grid.Grain {
		f.use_grain = 1
	}
	cell := s.Grid.CellPx
	columns, rows := (c.width+cell-1)/cell, (c.height+cell-1)/cell
	j.rows = rows
	j.inside, j.valid = make([]int, columns*rows), make([]int, columns*rows)
	values := make([]float64, 5*columns*rows)
	j.pin.Pin(unsafe.SliceData(values))
	j.grid = newGrid(j, columns, rows, values)
	j.pin.Pin(f)
	return j
}

var layouts = map[raster.PixelFormat]C.int32_t{
	raster.Mono8: C.PG_BYTES, raster.Mono10: C.PG_WORDS, raster.Mono12: C.PG_WORDS, raster.Mono16: C.PG_WORDS,
	raster.Mono10p: C.PG_10P, raster.Mono12p: C.PG_12P, raster.Mono12Packed: C.PG_12PACKED,
}

// truncation returns the standard deviation of a standard normal variable cut off at ±c
// (Johnson, Kotz and Balakrishnan, Continuous Univariate Distributions).
func truncation(c float64) float64 {
	density := math.Exp(-c*c/2) / math.Sqrt(2*math.Pi)
	return math.Sqrt(1 - 2*c*density/math.Erf(c/math.Sqrt2))
}

// each runs do for every band on a goroutine of its own, with the band's grid rows.
func (j *job) each(do func(b *band, row0, row1 C.int32_t) C.int) error {
	results := make([]C.int, len(j.bands))
	run := func(i int) {
		n := len(j.bands)
		results[i] = do(j.bands[i], C.int32_t(i*j.rows/n), C.int32_t((i+1)*j.rows/n))
	}
	var wait sync.WaitGroup
	for i := 1; i < len(j.bands); i++ {
		wait.Go(func() { run(i) })
	}
	run(0)
	wait.Wait()
	return firstError(results...)
}

// look takes the first look at the frame and reports whether its arithmetic holds it.
func (j *job) look(float bool) (bool, error) {
	f := j.frame
	f.scale, f.use_float = C.double(j.c.scale), 0
	if float {
		f.scale, f.use_float = 1, 1
	}
	j.bands = nil
	for range min(max(j.s.Bands, 1), j.rows) {
		b, err := j.c.bands.get(j.c.width, j.s.Grid.CellPx, float)
		if err != nil {
			return false, err
		}
		j.bands = append(j.bands, b)
	}
	j.blockBytes = int64(C.pg_sample_blocks(f)) * int64(j.rows)
	p := C.calloc(C.size_t(j.blockBytes+1), 1)
	if p == nil {
		return false, errMemory
	}
	defer C.free(p)
	err := j.each(func(b *band, row0, row1 C.int32_t) C.int { return C.pg_sample(f, j.guess.c, b.c, p, row0, row1) })
	if err != nil {
		return false, err
	}
	if err := firstError(C.pg_smooth(f, j.guess.c)); err != nil {
		return false, err
	}
	C.pg_calm(f, j.guess.c)
	if err := firstError(C.pg_sample_grain(f, j.guess.c, p)); err != nil {
		return false, err
	}
	if err := firstError(C.pg_grain(f, j.guess.c, grainShare)); err != nil {
		return false, err
	}
	return float || C.pg_fits(f, j.guess.c) != 0, nil
}

// grainShare is the part of the grain factor that the first look may rely on: it is
// measured on few blocks, and on means of 4 × 4 pixels, which see long waves up to a
// tenth stronger than the matched filter does.
const grainShare = 0.8

// pass finds candidates, and measures the grid on all pixels.
func (j *job) pass() error {
	err := j.each(func(b *band, row0, row1 C.int32_t) C.int {
		return C.pg_pass(j.frame, j.guess.c, j.grid.c, b.c, row0, row1)
	})
	if err != nil {
		return err
	}
	if err := firstError(C.pg_smooth(j.frame, j.grid.c)); err != nil {
		return err
	}
	return firstError(C.pg_grain(j.frame, j.grid.c, 1))
}

// again passes once more, with the levels and the noise of all pixels, where the first
// look was too far off. It returns in how many grid rows that was.
func (j *job) again(found *C.pg_blobs) (int, error) {
	var rows C.int32_t
	err := firstError(C.pg_again(j.frame, j.guess.c, j.grid.c, j.bands[0].c, found, &rows))
	return int(rows), err
}

// byRow returns the spans of a region merged and sorted, and where each row starts.
func byRow(region []raster.Span, width, height int) ([]cSpan, []int32) {
	start := make([]int32, height+1)
	order := func(a, b raster.Span) int {
		if a.Y != b.Y {
			return a.Y - b.Y
		}
		return a.X0 - b.X0
	}
	if !slices.IsSortedFunc(region, order) {
		region = slices.SortedFunc(slices.Values(region), order)
	}
	out := make([]cSpan, 0, len(region))
	for _, s := range region {
		s.X0, s.X1 = max(s.X0, 0), min(s.X1, width)
		if s.Y < 0 || s.Y >= height || s.X0 >= s.X1 {
			continue
		}
		if n := len(out) - 1; n >= 0 && int(out[n].y) == s.Y && int(out[n].x1) >= s.X0 {
			out[n].x1 = max(out[n].x1, C.int32_t(s.X1))
			continue
		}
		out = append(out, cSpan{y: C.int32_t(s.Y), x0: C.int32_t(s.X0), x1: C.int32_t(s.X1)})
		start[s.Y+1]++
	}
	for y := range height {
		start[y+1] += start[y]
	}
	return out, start
}
