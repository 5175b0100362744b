// Command crosscheck holds the objects that the fused pass finds against those of the
// readable reference, and writes both for a comparison with an independent program, which
// it does not run itself.
//
// Usage: crosscheck [-scene FILE] [-units N] DIR
//
// For N units on each of three surfaces (white noise alone, haze, haze with lay) DIR gets
// signal (corrected − background) and noise of the reference as little-endian float32, the
// region's mask as bytes, and objects.json with every connected set of pixels above the low
// threshold, as the reference and as the pass have it. It exits 1 where the two differ.
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

// The thresholds of all programs, in sigmas of the matched filter's output.
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
	units := flags.Int("units", 4, "how many units on each surface, spread over the scene")
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
	dir := flags.Arg(0)
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	doc := document{KLow: kLow, KHigh: kHigh}
	for _, surface := range surfaces() {
		if err := doc.add(dir, surface, s, *units); err != nil {
			return fmt.Errorf("%s: %w", surface.name, err)
		}
	}
	text, err := json.MarshalIndent(doc, "", " ")
	if err != nil {
		return err
	}
	if err := os.WriteFile(filepath.Join(dir, "objects.json"), text, 0o644); err != nil {
		return err
	}
	return doc.judge()
}

// document is objects.json.
type document struct {
	KLow   float64 `json:"k_low"`
	KHigh  float64 `json:"k_high"`
	Frames []frame `json:"frames"`

	tallies []tally // one for each surface
}

// frame is one picture and what was found in it.
type frame struct {
	Name    string   `json:"name"` // files NAME.signal, NAME.noise and NAME.mask
	Surface string   `json:"surface"`
	Width   int      `json:"width"`
	Height  int      `json:"height"`
	Objects []object `json:"objects"` // of the reference
	Fused   []object `json:"fused"`
}

// add writes units of a scene with one surface and compares what was found in them.
func (doc *document) add(dir string, s surface, scene render.Scene, units int) error {
	r, err := render.New(s.lay(scene))
	if err != nil {
		return err
	}
	view := r.Views()[0]
	chain, err := newChain(r, view)
	if err != nil {
		return err
	}
	t := tally{surface: s.name}
	for i := range units {
		unit := r.Unit(i * r.Scene().Units / units)
		shot, err := r.Frame(&unit, view)
		if err != nil {
			return err
		}
		found, err := chain.find(shot)
		if err != nil {
			return err
		}
		t.frame = fmt.Sprintf("%s-%02d", s.name, i)
		t.add(found)
		f, err := writeFrame(dir, t.frame, found)
		if err != nil {
			return err
		}
		f.Surface = s.name
		doc.Frames = append(doc.Frames, f)
	}
	doc.tallies = append(doc.tallies, t)
	return nil
}

// judge prints the comparison by surface; an error says where it failed.
func (doc *document) judge() error {
	var failed error
	for _, t := range doc.tallies {
		fmt.Println(t.String())
		if err := t.check(); err != nil && failed == nil {
			failed = err
		}
	}
	return failed
}

func writeFrame(dir, name string, found found) (frame, error) {
	mask := found.item.Region.Mask()
	f := frame{Name: name, Width: mask.Width, Height: mask.Height, Objects: found.objects(found.reference), Fused: found.objects(found.fused)}
	inside := make([]byte, len(mask.Bits))
	for i, in := range mask.Bits {
		if in {
			inside[i] = 1
		}
	}
	noise := found.item.Planes[pipeline.NoisePlane].Pixels
	for suffix, data := range map[string][]byte{".signal": floats(found.signal), ".noise": floats(noise), ".mask": inside} {
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
