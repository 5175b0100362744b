package main

import (
	"encoding/binary"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
)

// evaluateEMVA makes a calibration from 8 dark and the first 5 bright frames of the
// EMVA 1288 reference set 001 (12 bits, 640 × 480) and corrects the other 3 bright
// frames with it. Over good pixels, in percent of the mean:
//
//	raw_spread, corrected_spread   spatial standard deviation of the mean of the 3 frames
//	floor                          temporal noise of a frame (pairs of the 3) · √(1/3 + 1/5)
//	one_corrected, one_floor       the same for single frames: · √(1 + 1/5)
//	raw_low, corrected_low         highest minus lowest mean of whole 32 × 32 tiles of the mean of the 3
//
// gain_ramp and quantum_efficiency come from the ramp of exposures by the slopes of
// EMVA Standard 1288 up to 70 % of saturation; gain_flat is what the calibration found.
func evaluateEMVA(dataDir string) (map[string]any, error) {
	dir := filepath.Join(dataDir, "emva1288_ccd12")
	dark, err := readCounts12(dir, "dark_%02d.png", 8)
	if err != nil {
		return nil, err
	}
	bright, err := readCounts12(dir, "bright_%02d.png", 8)
	if err != nil {
		return nil, err
	}
	const used = 5
	made, err := calibrate.Make(evaluationRequest("ccd12"), calibrate.Inputs{
		Dark: calibrate.Frames(dark...), Response: calibrate.Frames(bright[:used]...),
	})
	if err != nil {
		return nil, err
	}
	out, err := flatFigures(made, bright[used:], used)
	if err != nil {
		return nil, err
	}
	out["gain_flat_dn_per_e"] = made.Calibration.Noise.GainDNPerE
	out["dark_noise_e"] = calibrate.DarkNoiseE(made.Calibration.Noise)
	out["bad_pixels"] = len(made.Calibration.BadPixels)
	return out, addRamp(out, dir)
}

// evaluateLineFlats leaves each of the 10 white frames (2 × 640) out in turn,
// calibrates with the other nine and the darks, and corrects it: spatial standard
// deviation in percent of the mean over good pixels, mean of the 10. The stored values
// are quarters of a count; they are rounded to counts (of about 28 000).
func evaluateLineFlats(dataDir string) (map[string]any, error) {
	dir := filepath.Join(dataDir, "line_flats")
	white, err := readLineFrames(filepath.Join(dir, "white.f32"))
	if err != nil {
		return nil, err
	}
	dark, err := readLineFrames(filepath.Join(dir, "dark.f32"))
	if err != nil {
		return nil, err
	}
	var raw, corrected, worst float64
	bad := 0
	for i := range white {
		others := slices.Delete(slices.Clone(white), i, i+1)
		made, err := calibrate.Make(evaluationRequest("line"), calibrate.Inputs{
			Dark: calibrate.Frames(dark...), Response: calibrate.Frames(others...),
		})
		if err != nil {
			return nil, fmt.Errorf("without frame %d: %w", i, err)
		}
		before, after, err := correct(made.Calibration, white[i].Raw)
		if err != nil {
			return nil, err
		}
		good := goodPixels(made.Calibration)
		raw += spread(before, good) / float64(len(white))
		corrected += spread(after, good) / float64(len(white))
		worst = max(worst, spread(after, good))
		bad = max(bad, len(made.Calibration.BadPixels))
	}
	return map[string]any{
		"raw_spread_percent": 100 * raw, "corrected_spread_percent": 100 * corrected,
		"worst_corrected_spread_percent": 100 * worst, "bad_pixels": bad,
	}, nil
}

func evaluationRequest(camera string) calibrate.Request {
	return calibrate.Request{
		Camera: camera, Light: "flat", Mode: "evaluation", MadeAt: "2000-01-01T00:00:00Z", Rules: calibrate.DefaultRules(),
		Capture: pipeline.Capture{ExposureUS: 1}, // the same for all frames of a set; not used as a number
		Scale:   pipeline.Scale{UMPerPx: 1, Source: "none: no part in these pictures"},
	}
}

func readCounts12(dir, pattern string, n int) ([]calibrate.Frame, error) {
	var out []calibrate.Frame
	for i := range n {
		f, err := readFrame12(filepath.Join(dir, fmt.Sprintf(pattern, i)))
		if err != nil {
			return nil, err
		}
		out = append(out, f)
	}
	return out, nil
}

func readFrame12(path string) (calibrate.Frame, error) {
	raw, err := files.Read(path, files.Options{SignificantBits: 12})
	return calibrate.Frame{Name: path, Capture: pipeline.Capture{ExposureUS: 1}, Raw: raw}, err
}

func readLineFrames(path string) ([]calibrate.Frame, error) {
	const width, height, n = 640, 2, 10
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	if len(data) != 4*width*height*n {
		return nil, fmt.Errorf("%s: got %d bytes, want %d", path, len(data), 4*width*height*n)
	}
	var out []calibrate.Frame
	for i := range n {
		counts := make([]uint16, width*height)
		for j := range counts {
			bits := binary.LittleEndian.Uint32(data[4*(i*len(counts)+j):])
			counts[j] = uint16(math.Round(float64(math.Float32frombits(bits))))
		}
		out = append(out, calibrate.Frame{
			Name: fmt.Sprintf("%s[%d]", filepath.Base(path), i), Capture: pipeline.Capture{ExposureUS: 1},
			Raw: raster.Pack(raster.Mono16, counts, width, height),
		})
	}
	return out, nil
}

// correct returns raw − dark and (raw − dark) / response.
func correct(c *pipeline.Calibration, r raster.Raw) (before, after *raster.Plane, err error) {
	before, err = r.Plane()
	if err != nil {
		return nil, nil, err
	}
	after = raster.NewPlane(r.Width, r.Height)
	for i := range before.Pix {
		before.Pix[i] -= c.Dark.Pix[i]
		after.Pix[i] = before.Pix[i] / c.Response.Pix[i]
	}
	return before, after, nil
}

func goodPixels(c *pipeline.Calibration) *raster.Mask {
	m := raster.NewMask(c.Capture.Width, c.Capture.Height)
	for i := range m.Bits {
		m.Bits[i] = true
	}
	for _, b := range c.BadPixels {
		m.Set(b.X, b.Y, false)
	}
	return m
}

// meanOver returns the mean over the mask within x0 <= x < x1, y0 <= y < y1.
func meanOver(p *raster.Plane, m *raster.Mask, x0, y0, x1, y1 int) float64 {
	var sum, n float64
	for y := y0; y < y1; y++ {
		for x := x0; x < x1; x++ {
			if m.At(x, y) {
				sum += float64(p.At(x, y))
				n++
			}
		}
	}
	return sum / n
}

// spread returns the standard deviation over the mask divided by the mean.
func spread(p *raster.Plane, m *raster.Mask) float64 {
	mean := meanOver(p, m, 0, 0, p.Width, p.Height)
	var sum, n float64
	for i, v := range p.Pix {
		if m.Bits[i] {
			sum += (float64(v) - mean) * (float64(v) - mean)
			n++
		}
	}
	return math.Sqrt(sum/n) / mean
}

// lowFrequency returns the range of the means of whole 32 × 32 tiles divided by the mean.
func lowFrequency(p *raster.Plane, m *raster.Mask) float64 {
	const side = 32
	low, high := math.Inf(1), math.Inf(-1)
	for y := 0; y+side <= p.Height; y += side {
		for x := 0; x+side <= p.Width; x += side {
			v := meanOver(p, m, x, y, x+side, y+side)
			low, high = min(low, v), max(high, v)
		}
	}
	return (high - low) / meanOver(p, m, 0, 0, p.Width, p.Height)
}

// flatFigures corrects the mean of the test frames, and each of them.
func flatFigures(made calibrate.Made, tests []calibrate.Frame, used int) (map[string]any, error) {
	good, c := goodPixels(made.Calibration), made.Calibration.Capture
	n := float64(len(tests))
	before, after := raster.NewPlane(c.Width, c.Height), raster.NewPlane(c.Width, c.Height)
	var one, variance float64
	for i, f := range tests {
		b, a, err := correct(made.Calibration, f.Raw)
		if err != nil {
			return nil, err
		}
		level, err := pairLevel(f.Raw, tests[(i+1)%len(tests)].Raw)
		if err != nil {
			return nil, err
		}
		one += spread(a, good) / n
		variance += level.VarianceDN2 / n
		for j := range before.Pix {
			before.Pix[j] += b.Pix[j] / float32(n)
			after.Pix[j] += a.Pix[j] / float32(n)
		}
	}
	noise := math.Sqrt(variance) / meanOver(before, good, 0, 0, c.Width, c.Height)
	floor, oneFloor := noise*math.Sqrt(1/n+1/float64(used)), noise*math.Sqrt(1+1/float64(used))
	return map[string]any{
		"raw_spread_percent": 100 * spread(before, good), "corrected_spread_percent": 100 * spread(after, good),
		"floor_percent": 100 * floor, "corrected_over_floor": spread(after, good) / floor,
		"one_corrected_percent": 100 * one, "one_floor_percent": 100 * oneFloor, "one_corrected_over_floor": one / oneFloor,
		"raw_low_percent": 100 * lowFrequency(before, good), "corrected_low_percent": 100 * lowFrequency(after, good),
		"low_frequency_ratio": lowFrequency(before, good) / lowFrequency(after, good),
	}, nil
}
