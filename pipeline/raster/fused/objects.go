package fused

// #include "objects.h"
import "C"

import (
	"slices"
	"sync"
	"unsafe"

	"lapgate/pipeline/raster"
)

// objects evaluates the candidates and measures the blobs.
func (j *job) objects() (*Result, error) {
	found := C.pg_blobs_new()
	if found == nil {
		return nil, errMemory
	}
	defer C.pg_blobs_free(found)
	r := &Result{Grid: j.rasterGrid(), Floats: j.frame.use_float != 0}
	some := new(spanBuffer)
	for _, b := range j.bands {
		if err := firstError(C.pg_collect(found, b.c)); err != nil {
			return nil, err
		}
		r.Saturated = some.append(r.Saturated, b.c.saturated.at, int64(b.c.saturated.count))
	}
	var err error
	if r.RowsAgain, err = j.again(found); err != nil {
		return nil, err
	}
	first := j.guessBytes + max(j.blockBytes, int64(C.pg_blobs_bytes(found))) // taken up to here
	j.dropGuess()
	var snr *C.float
	if j.s.SNR {
		r.SNR = raster.NewPlane(j.c.width, j.c.height)
		snr = (*C.float)(pinned(j, r.SNR.Pix))
	}
	if err := firstError(C.pg_find(j.frame, j.grid.c, j.bands[0].c, found, C.int32_t(j.s.MinAreaPx), snr)); err != nil {
		return nil, err
	}
	r.Truncated = j.strongest(found)
	if err := firstError(C.pg_index(j.frame, found)); err != nil {
		return nil, err
	}
	r.MemoryBytes = max(first, int64(found.peak), int64(C.pg_blobs_bytes(found)))
	for _, b := range j.bands {
		r.MemoryBytes += int64(C.pg_band_bytes(b.c))
	}
	r.Blobs = make([]Blob, int(found.count))
	return r, j.measure(found, r.Blobs)
}

// spanBuffer is what spans pass through on their way from C; made once, as C is given its
// address.
type spanBuffer [64]cSpan

func (some *spanBuffer) append(dst []raster.Span, runs *C.pg_run, n int64) []raster.Span {
	if n == 0 {
		return dst
	}
	dst = slices.Grow(dst, int(n))
	for done := int64(0); done < n; {
		part := min(n-done, int64(len(some)))
		first := (*C.pg_run)(unsafe.Add(unsafe.Pointer(runs), uintptr(done)*unsafe.Sizeof(C.pg_run{})))
		C.pg_spans(first, C.int64_t(part), &some[0])
		for _, s := range some[:part] {
			dst = append(dst, raster.Span{Y: int(s.y), X0: int(s.x0), X1: int(s.x1)})
		}
		done += part
	}
	return dst
}

// strongest keeps the MaxBlobs blobs with the highest peaks, in their old order; it
// reports whether there were more.
func (j *job) strongest(found *C.pg_blobs) bool {
	most := j.s.MaxBlobs
	if most == 0 || int(found.count) <= most {
		return false
	}
	blobs := unsafe.Slice(found.blobs, int(found.count))
	peaks := make([]float32, len(blobs))
	for i, b := range blobs {
		peaks[i] = float32(b.peak)
	}
	slices.Sort(peaks)
	least := peaks[len(peaks)-most]
	keep, n := make([]uint8, len(blobs)), 0
	for i, b := range blobs {
		if float32(b.peak) >= least && n < most {
			keep[i] = 1
			n++
		}
	}
	C.pg_keep(found, (*C.uint8_t)(unsafe.SliceData(keep)))
	return true
}

// measure fills out on as many goroutines as there are bands.
func (j *job) measure(found *C.pg_blobs, out []Blob) error {
	workers := min(len(j.bands), max(len(out), 1))
	results := make([]C.int, workers)
	var wait sync.WaitGroup
	work := func(w int) {
		m, some := new(C.pg_measure), new(spanBuffer)
		for i := w; i < len(out) && results[w] == C.PG_OK; i += workers {
			results[w] = j.measureOne(found, out, i, m, some)
		}
	}
	for w := 1; w < workers; w++ {
		wait.Go(func() { work(w) })
	}
	work(0)
	wait.Wait()
	return firstError(results...)
}

func (j *job) measureOne(found *C.pg_blobs, out []Blob, i int, m *C.pg_measure, some *spanBuffer) C.int {
	if e := C.pg_measure_blob(j.frame, j.grid.c, found, C.int64_t(i), m); e != C.PG_OK {
		return e
	}
	b := unsafe.Slice(found.blobs, int(found.count))[i]
	out[i] = Blob{Blemish: raster.Blemish{X: float64(m.x), Y: float64(m.y), AreaPx: int(b.area), HalfArea: float64(m.half_area),
		Length: float64(m.length), Width: float64(m.width), Diameter: float64(m.diameter), Angle: float64(m.angle),
		Height: float64(m.height), Flux: float64(m.flux), Peak: float64(m.peak), PeakSNR: float64(b.peak), SNR: float64(m.snr),
		Dark: m.dark != 0, Long: m.is_long != 0, Coiled: m.coiled != 0, X0: int(b.x0), Y0: int(b.y0), X1: int(b.x1), Y1: int(b.y1),
		PeakX: int(b.peak_x), PeakY: int(b.peak_y)}}
	out[i].Path = slices.Grow(out[i].Path, int(m.points))
	for k := range int(m.points) {
		out[i].Path = append(out[i].Path, raster.Point{X: float64(m.path[2*k]), Y: float64(m.path[2*k+1])})
	}
	runs := (*C.pg_run)(unsafe.Add(unsafe.Pointer(found.runs.at), uintptr(b.first)*unsafe.Sizeof(C.pg_run{})))
	out[i].Spans = some.append(nil, runs, int64(b.runs))
	return C.PG_OK
}
