package main

import (
	"context"
	"fmt"
	"path/filepath"
	"strings"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
	"lapgate/plugins/blobs"
)

const (
	tilesName = "magnetic_tile"
	tilesView = "top"
	// tilesFalseAlarms is the share of clean pictures that may be rejected where limits are
	// chosen.
	tilesFalseAlarms = 0.05
)

// kinds says which defects count.
type kinds int

const (
	digs    kinds = iota // those that the recipe calls digs
	anyKind              // all
)

// tile is what came of one picture.
type tile struct {
	picture
	found []found
	truth int           // pixels of the defect; 0 = clean
	inRim bool          // most of the defect lies where the recipe does not look
	holds []string      // reasons for which it could not be accepted, whatever its limits say
	top   [2]float64    // largest peak_sigma, by kinds; 0 = no defect
	score [2]pixelScore // of the defects above the limit, by kinds
	// verdict is that of the recipe, and what one limit on all defects would say.
	verdict [2]pipeline.Verdict
}

// found is one defect that was found.
type found struct {
	peakSigma, lengthPx float64
	marked, both        int // its pixels, and those of them that lie on the truth
}

// tileSet inspects tiles with one recipe.
type tileSet struct {
	dir    string
	recipe *pipeline.Recipe
	line   *pipeline.Pipeline
	blobs  blobs.Settings
}

func newTileSet(o options, change func(*pipeline.Recipe)) (*tileSet, []picture, []picture, error) {
	t := &tileSet{dir: filepath.Join(o.data, tilesName)}
	all, err := pictures(t.dir)
	if err != nil {
		return nil, nil, nil, err
	}
	choose, score, err := loadSplit(o, tilesName, all)
	if err != nil {
		return nil, nil, nil, err
	}
	var cat *pipeline.Catalogue
	if t.recipe, cat, err = loadRecipe(o, tilesName); err != nil {
		return nil, nil, nil, err
	}
	if change != nil {
		change(t.recipe)
	}
	if t.blobs, err = blobSettings(t.recipe.Views[0]); err != nil {
		return nil, nil, nil, err
	}
	t.line, err = build(t.recipe, cat, nil, true)
	return t, choose, score, err
}

func (t *tileSet) inspect(list []picture) ([]tile, error) {
	return inParallel(len(list), func(i int) (tile, error) { return t.tile(list[i]) })
}

func (t *tileSet) tile(p picture) (tile, error) {
	out := tile{picture: p}
	raw, err := files.Read(filepath.Join(t.dir, "images", p.file), files.Options{})
	if err != nil {
		return out, err
	}
	res, err := runPicture(t.line, t.recipe, tilesView, p.file, raw)
	if err != nil {
		return out, err
	}
	pixels, err := footprintsOf(res.Item, t.blobs)
	if err != nil {
		return out, err
	}
	var mask *raster.Mask // nil = clean
	if p.class != "Free" {
		if mask, err = t.truth(p, raw); err != nil {
			return out, err
		}
		out.truth, out.inRim = mask.Count(), 2*onMask(mask, res.Item.Region.Inside().Spans()) < mask.Count()
	}
	res.Item.Planes = nil
	e, j := t.line.Finish(context.Background(), res.Item.Identity, []pipeline.ViewResult{res}, nil, time.Unix(0, 0))
	out.judge(e, j, pixels, mask)
	return out, nil
}

// judge takes over what was found and the verdict of the recipe.
func (t *tile) judge(e pipeline.Evidence, j pipeline.Judgement, pixels footprints, mask *raster.Mask) {
	marks := marksOf(j)
	t.verdict[digs], t.holds = j.Verdict, holdsOf(j)
	t.score[digs].truth = t.truth
	for _, d := range e.Defects {
		f := found{peakSigma: d.PeakSigma, lengthPx: d.LengthPx, both: onMask(mask, pixels[d.ID])}
		for _, s := range pixels[d.ID] {
			f.marked += s.Len()
		}
		t.found = append(t.found, f)
		t.top[anyKind] = max(t.top[anyKind], d.PeakSigma)
		if d.Kind == pipeline.Dig {
			t.top[digs] = max(t.top[digs], d.PeakSigma)
		}
		if marks[d.ID] {
			t.score[digs] = t.score[digs].with(f)
		}
	}
}

// onMask counts the pixels of spans that are in the mask; nil = none is.
func onMask(mask *raster.Mask, spans []raster.Span) int {
	n := 0
	for _, s := range spans {
		for x := s.X0; x < s.X1 && mask != nil; x++ {
			if mask.At(x, s.Y) {
				n++
			}
		}
	}
	return n
}

// holdsOf returns the names of a judgement's reasons to hold that are no limits: with one of
// them a unit is never accepted. A limit that is provably broken still rejects it.
func holdsOf(j pipeline.Judgement) []string {
	var out []string
	for _, r := range j.Reasons {
		if r.Verdict == pipeline.Hold && r.Rule == "" {
			out = append(out, r.Name)
		}
	}
	return out
}

// judgeBy gives a tile the marks and the verdict of one limit on the defects that count.
func (t *tile) judgeBy(k kinds, limit float64, counts func(found) bool) {
	t.top[k], t.score[k] = 0, pixelScore{truth: t.truth}
	for _, f := range t.found {
		if !counts(f) {
			continue
		}
		t.top[k] = max(t.top[k], f.peakSigma)
		if f.peakSigma > limit {
			t.score[k] = t.score[k].with(f)
		}
	}
	switch {
	case t.top[k] > limit: // as the product has it: what was found was found
		t.verdict[k] = pipeline.Reject
	case len(t.holds) > 0:
		t.verdict[k] = pipeline.Hold
	default:
		t.verdict[k] = pipeline.Accept
	}
}

// judgeAny gives tiles the verdict and the marks of one limit on all defects.
func judgeAny(tiles []tile, limit float64) {
	for i := range tiles {
		tiles[i].judgeBy(anyKind, limit, func(found) bool { return true })
	}
}

// truth returns the mask of a defective tile.
func (t *tileSet) truth(p picture, raw raster.Raw) (*raster.Mask, error) {
	mask, err := readMask(filepath.Join(t.dir, "masks", strings.TrimSuffix(p.file, filepath.Ext(p.file))+".png"))
	if err == nil && (mask.Width != raw.Width || mask.Height != raw.Height) {
		err = fmt.Errorf("%s: its mask has %d × %d pixels, the picture %d × %d", p.file, mask.Width, mask.Height, raw.Width, raw.Height)
	}
	return mask, err
}

// readMask reads a picture whose white pixels are the defect.
func readMask(path string) (*raster.Mask, error) {
	raw, err := files.Read(path, files.Options{})
	if err != nil {
		return nil, err
	}
	p, err := raw.Plane()
	if err != nil {
		return nil, err
	}
	m := raster.NewMask(p.Width, p.Height)
	for i, v := range p.Pix {
		m.Bits[i] = v > 127
	}
	return m, nil
}
