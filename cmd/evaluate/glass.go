package main

import (
	"context"
	"fmt"
	"io"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
	"lapgate/plugins/blobs"
)

const glassName = "aircraft_glass_agdd"

// glassColour is what becomes of the colour pictures: luma, the rule of the still-picture
// formats, because neither the marks nor the glass are coloured.
const glassColour = files.ColourLuma

// glassPair is one pair of pictures on its way.
type glassPair struct {
	picture
	truth   []truthBox
	results []pipeline.ViewResult
	pixels  map[string]footprints // by view
}

// glassSet inspects pairs with one recipe.
type glassSet struct {
	dir    string
	recipe *pipeline.Recipe
	line   *pipeline.Pipeline
	truth  map[string][]truthBox
	blobs  map[string]blobs.Settings // by view
}

func newGlassSet(o options, change func(*pipeline.Recipe)) (*glassSet, []picture, []picture, error) {
	g := &glassSet{dir: filepath.Join(o.data, glassName), blobs: map[string]blobs.Settings{}}
	all, err := pictures(g.dir)
	if err != nil {
		return nil, nil, nil, err
	}
	choose, score, err := loadSplit(o, glassName, all)
	if err != nil {
		return nil, nil, nil, err
	}
	if g.truth, err = readBoxes(g.dir); err != nil {
		return nil, nil, nil, err
	}
	var cat *pipeline.Catalogue
	if g.recipe, cat, err = loadRecipe(o, glassName); err != nil {
		return nil, nil, nil, err
	}
	if change != nil {
		change(g.recipe)
	}
	for _, v := range g.recipe.Views {
		if g.blobs[v.Name], err = blobSettings(v); err != nil {
			return nil, nil, nil, err
		}
	}
	g.line, err = build(g.recipe, cat, nil, true)
	return g, choose, score, err
}

// inspect runs the views of all pairs.
func (g *glassSet) inspect(list []picture) ([]glassPair, error) {
	return inParallel(len(list), func(i int) (glassPair, error) { return g.pair(list[i]) })
}

func (g *glassSet) pair(p picture) (glassPair, error) {
	out := glassPair{picture: p, pixels: map[string]footprints{}, truth: g.truth[strings.TrimSuffix(p.file, filepath.Ext(p.file))]}
	for _, v := range g.recipe.Views {
		raw, err := files.Read(filepath.Join(g.dir, "images_"+v.Name, p.file), files.Options{Colour: glassColour})
		if err != nil {
			return out, err
		}
		res, err := runPicture(g.line, g.recipe, v.Name, p.file, raw)
		if err != nil {
			return out, err
		}
		if out.pixels[v.Name], err = footprintsOf(res.Item, g.blobs[v.Name]); err != nil {
			return out, err
		}
		res.Item.Planes = nil
		out.results = append(out.results, res)
	}
	return out, nil
}

// runPicture runs one view of a recipe on one picture.
func runPicture(line *pipeline.Pipeline, recipe *pipeline.Recipe, view, file string, raw raster.Raw) (pipeline.ViewResult, error) {
	id := identity(recipe, strings.TrimSuffix(file, filepath.Ext(file)))
	h := pipeline.FrameHeader{Identity: id, View: view, Count: 1, Stride: raw.Stride,
		Capture: pipeline.Capture{Format: raw.Format, Width: raw.Width, Height: raw.Height}}
	res := line.RunView(context.Background(), id, pipeline.View{Name: view, Frames: []pipeline.Frame{{Header: h, Raw: raw}}})
	if res.Failure != nil {
		return res, fmt.Errorf("%s: %s: %s", file, res.Failure.Reason, res.Failure.Detail)
	}
	return res, nil
}

// judge merges and judges a pair. It returns the merged defects with the pixels that all
// their views gave them, and which of them break a limit: only those are marks, for a
// polished surface is full of hairlines that no drawing forbids.
func (g *glassSet) judge(p glassPair) (defects []pipeline.Defect, pixels [][]raster.Span, marks map[int]bool) {
	e, j := g.line.Finish(context.Background(), p.results[0].Item.Identity, p.results, nil, time.Unix(0, 0))
	for _, d := range e.Defects {
		var spans []raster.Span
		for _, ref := range d.MergedFrom {
			spans = append(spans, p.pixels[ref.View][ref.ID]...)
		}
		pixels = append(pixels, spans)
	}
	return e.Defects, pixels, marksOf(j)
}

// marksOf returns the ids of the defects that break a limit.
func marksOf(j pipeline.Judgement) map[int]bool {
	marks := map[int]bool{}
	for _, r := range j.Reasons {
		if r.DefectID > 0 {
			marks[r.DefectID] = true
		}
	}
	return marks
}

// score scores the marks of a pair.
func (g *glassSet) score(p glassPair, truth []truthBox) boxScore {
	defects, pixels, marks := g.judge(p)
	var found [][]raster.Span
	for i, d := range defects {
		if marks[d.ID] {
			found = append(found, pixels[i])
		}
	}
	return scoreBoxes(truth, found)
}

// evaluateGlass scores the recipe on the pictures that its settings were not chosen on.
func evaluateGlass(o options, progress io.Writer) (*result, error) {
	g, choose, score, err := newGlassSet(o, nil)
	if err != nil {
		return nil, err
	}
	defer g.line.Close()
	r := &result{}
	for _, side := range []struct {
		name string
		list []picture
	}{{"scored pictures", score}, {"pictures the settings were chosen on", choose}} {
		fmt.Fprintf(progress, "%s: %d %s\n", glassName, len(side.list), side.name)
		pairs, err := g.inspect(side.list)
		if err != nil {
			return nil, err
		}
		total, err := r.boxes(g, pairs, side.name)
		if err != nil {
			return nil, err
		}
		if side.name == "scored pictures" {
			r.atLeast("F1, scored pictures", total.f1(), 0.90)
			if err := r.byClass(g, pairs); err != nil {
				return nil, err
			}
		}
	}
	return r, nil
}

// boxes adds F1, recall, precision and false defects of a set of pairs.
func (r *result) boxes(g *glassSet, pairs []glassPair, name string) (boxScore, error) {
	var total boxScore
	each := make([]boxScore, len(pairs))
	for i, p := range pairs {
		each[i] = g.score(p, p.truth)
		total = total.plus(each[i])
	}
	sum := func(drawn []int) boxScore {
		var s boxScore
		for _, i := range drawn {
			s = s.plus(each[i])
		}
		return s
	}
	n := len(pairs)
	r.between("F1, "+name, total.f1(), bootstrap(n, func(d []int) float64 { return sum(d).f1() }), n, "pictures; bootstrap over them")
	if _, err := r.share("recall, "+name, total.found, total.found+total.missed, "boxes"); err != nil {
		return total, err
	}
	if _, err := r.share("precision, "+name, total.found, total.found+total.falses, "found boxes and false defects"); err != nil {
		return total, err
	}
	perImage := func(d []int) float64 { return float64(sum(d).falses) / float64(n) }
	r.between("false defects per picture, "+name, float64(total.falses)/float64(n), bootstrap(n, perImage), n, "pictures; bootstrap over them")
	return total, nil
}

// byClass adds the recall of each class.
func (r *result) byClass(g *glassSet, pairs []glassPair) error {
	for _, class := range []string{"0", "1", "2", "3"} {
		var s boxScore
		for _, p := range pairs {
			of := slices.DeleteFunc(slices.Clone(p.truth), func(b truthBox) bool { return b.class != class })
			s = s.plus(g.score(p, of))
		}
		if _, err := r.share("recall of class "+class+", scored pictures", s.found, s.found+s.missed, "boxes"); err != nil {
			return err
		}
	}
	return nil
}
