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

// tile is one picture on its way.
type tile struct {
	picture
	result pipeline.ViewResult
	pixels footprints
	mask   *raster.Mask  // of the defect; nil = clean
	top    [2]float64    // largest peak_sigma, by kinds; 0 = no defect
	score  [2]pixelScore // of the defects above the limit, by kinds
	// rejected is the verdict, by kinds: that of the recipe, and what one limit on all defects
	// would say.
	rejected [2]bool
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
	if out.result, err = runPicture(t.line, t.recipe, tilesView, p.file, raw); err != nil {
		return out, err
	}
	if out.pixels, err = footprintsOf(out.result.Item, t.blobs); err != nil {
		return out, err
	}
	out.result.Item.Planes = nil
	e, j := t.line.Finish(context.Background(), out.result.Item.Identity, []pipeline.ViewResult{out.result}, nil, time.Unix(0, 0))
	for _, d := range e.Defects {
		out.top[anyKind] = max(out.top[anyKind], d.PeakSigma)
		if d.Kind == pipeline.Dig {
			out.top[digs] = max(out.top[digs], d.PeakSigma)
		}
	}
	if p.class != "Free" {
		if out.mask, err = t.truth(p, raw); err != nil {
			return out, err
		}
	}
	marks := marksOf(j)
	out.rejected[digs] = j.Verdict == pipeline.Reject
	out.score[digs] = out.pixelScore(func(d pipeline.Defect) bool { return marks[d.ID] })
	return out, nil
}

// judgeAny gives tiles the verdict and the marks of one limit on all defects.
func judgeAny(tiles []tile, limit float64) {
	for i, t := range tiles {
		tiles[i].rejected[anyKind] = t.top[anyKind] > limit
		tiles[i].score[anyKind] = t.pixelScore(func(d pipeline.Defect) bool { return d.PeakSigma > limit })
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
