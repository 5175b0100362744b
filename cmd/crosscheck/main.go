// Command crosscheck writes frames and the objects that lapgate finds in them, for a
// comparison with an independent program. It compares nothing itself.
//
// Usage: crosscheck [-scene FILE] [-units N] DIR
//
// For each unit DIR gets signal (corrected − background) and noise as little-endian
// float32, the region's mask as bytes, and objects.json with every connected set of
// pixels above the low threshold.
package main

import (
	"encoding/binary"
	"encoding/json"
	"flag"
	"fmt"
	"os"
	"path/filepath"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/render"
)

// The thresholds of both programs, in sigmas of the matched filter's output.
const (
	kLow  = 3.5
	kHigh = 6
)

func main() {
	if err := run(os.Args[1:]); err != nil {
		fmt.Fprintln(os.Stderr, "crosscheck:", err)
		os.Exit(1)
	}
}

func run(args []string) error {
	flags := flag.NewFlagSet("crosscheck", flag.ContinueOnError)
	scene := flags.String("scene", "testdata/scenes/detect.yaml", "scene to draw")
	units := flags.Int("units", 8, "how many units, spread over the scene")
	if err := flags.Parse(args); err != nil {
		return err
	}
	if flags.NArg() != 1 || *units < 1 {
		return fmt.Errorf("got %d folders and %d units, want one folder and at least one unit", flags.NArg(), *units)
	}
	s, _, err := configs.Load[render.Scene](*scene)
	if err != nil {
		return err
	}
	r, err := render.New(s)
	if err != nil {
		return err
	}
	dir := flags.Arg(0)
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	return write(dir, r, *units)
}

// document is objects.json.
type document struct {
	KLow   float64 `json:"k_low"`
	KHigh  float64 `json:"k_high"`
	Frames []frame `json:"frames"`
}

// frame is one picture and what was found in it.
type frame struct {
	Name    string   `json:"name"` // files NAME.signal, NAME.noise and NAME.mask
	Width   int      `json:"width"`
	Height  int      `json:"height"`
	Objects []object `json:"objects"`
}

// object is one connected set of pixels above the low threshold.
type object struct {
	AreaPx     int     `json:"area_px"`
	FilteredX  float64 `json:"filtered_x"` // centre of gravity of the filtered signal over its pixels
	FilteredY  float64 `json:"filtered_y"`
	XPx        float64 `json:"x_px"` // centre as lapgate reports it
	YPx        float64 `json:"y_px"`
	DiameterPx float64 `json:"diameter_px"`
	LengthPx   float64 `json:"length_px"`
	WidthPx    float64 `json:"width_px"`
	PeakSigma  float64 `json:"peak_sigma"`
	PeakX      int     `json:"peak_x"`
	PeakY      int     `json:"peak_y"`
}

func write(dir string, r *render.Renderer, units int) error {
	view := r.Views()[0]
	chain, err := newChain(r, view)
	if err != nil {
		return err
	}
	doc := document{KLow: kLow, KHigh: kHigh}
	for i := range units {
		unit := r.Unit(i * r.Scene().Units / units)
		shot, err := r.Frame(&unit, view)
		if err != nil {
			return err
		}
		item, err := chain.run(shot)
		if err != nil {
			return err
		}
		f, err := writeFrame(dir, fmt.Sprintf("frame-%02d", i), item)
		if err != nil {
			return err
		}
		doc.Frames = append(doc.Frames, f)
	}
	text, err := json.MarshalIndent(doc, "", " ")
	if err != nil {
		return err
	}
	return os.WriteFile(filepath.Join(dir, "objects.json"), text, 0o644)
}

func writeFrame(dir, name string, item *pipeline.Item) (frame, error) {
	mask := item.Region.Mask()
	corrected, background := item.Planes[pipeline.CorrectedPlane].Pixels, item.Planes[pipeline.BackgroundPlane].Pixels
	noise, snr := item.Planes[pipeline.NoisePlane].Pixels, item.Planes[pipeline.SNRPlane].Pixels
	signal := raster.NewPlane(snr.Width, snr.Height)
	raster.Subtract(signal, corrected, background)
	f := frame{Name: name, Width: snr.Width, Height: snr.Height, Objects: objects(signal, noise, snr, mask)}
	inside := make([]byte, len(mask.Bits))
	for i, in := range mask.Bits {
		if in {
			inside[i] = 1
		}
	}
	for suffix, data := range map[string][]byte{".signal": floats(signal), ".noise": floats(noise), ".mask": inside} {
		if err := os.WriteFile(filepath.Join(dir, name+suffix), data, 0o644); err != nil {
			return f, err
		}
	}
	return f, nil
}

func floats(p *raster.Plane) []byte {
	out, err := binary.Append(nil, binary.LittleEndian, p.Pix)
	if err != nil {
		panic(err) // float32 has a fixed size
	}
	return out
}

func objects(signal, noise, snr *raster.Plane, mask *raster.Mask) []object {
	filtered := raster.NewPlane(signal.Width, signal.Height)
	raster.MatchedFilter(filtered, signal, mask)
	blobs := raster.Label(snr, kLow, kLow)
	measurer := raster.NewMeasurer(signal, noise, mask, blobs)
	var out []object
	for i, b := range blobs {
		m := measurer.Measure(i)
		o := object{AreaPx: m.AreaPx, XPx: m.X, YPx: m.Y, DiameterPx: m.Diameter, LengthPx: m.Length, WidthPx: m.Width,
			PeakSigma: m.PeakSNR, PeakX: b.PeakX, PeakY: b.PeakY}
		o.FilteredX, o.FilteredY = gravity(filtered, b.Spans)
		out = append(out, o)
	}
	return out
}

func gravity(p *raster.Plane, spans []raster.Span) (x, y float64) {
	sum := 0.
	for _, s := range spans {
		for u := s.X0; u < s.X1; u++ {
			v := float64(p.At(u, s.Y))
			sum, x, y = sum+v, x+v*float64(u), y+v*float64(s.Y)
		}
	}
	return x / sum, y / sum
}
