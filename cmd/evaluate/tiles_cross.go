package main

import (
	"fmt"
	"io"
	"path/filepath"
	"slices"
)

// fold is one part of a cross-validation: groups that are left out of the choice, and scored.
type fold map[string]bool

// foldsOf makes one fold of each defective group; clean groups are dealt to the folds in turn.
// Both go by the order of their first pictures in the list.
func foldsOf(list []picture) []fold {
	var folds []fold
	seen := fold{}
	for _, p := range ofPictures(list, "Blowhole") {
		if !seen[p.group] {
			seen[p.group] = true
			folds = append(folds, fold{p.group: true})
		}
	}
	dealt := 0
	for _, p := range ofPictures(list, "Free") {
		if !seen[p.group] && len(folds) > 0 {
			seen[p.group] = true
			folds[dealt%len(folds)][p.group] = true
			dealt++
		}
	}
	return folds
}

// part returns the tiles whose groups are in the fold, or those whose groups are not.
func (f fold) part(tiles []tile, in bool) []tile {
	return slices.DeleteFunc(slices.Clone(tiles), func(t tile) bool { return f[t.group] != in })
}

// remembered returns an inspector that inspects with the same settings once.
func remembered(of inspector) inspector {
	type key struct {
		rim, grid int
		low       float64
	}
	known := map[key][]tile{}
	return func(rim, grid int, low float64) ([]tile, error) {
		k := key{rim, grid, low}
		if tiles, ok := known[k]; ok {
			return tiles, nil
		}
		tiles, err := of(rim, grid, low)
		known[k] = tiles
		return tiles, err
	}
}

// leftOut chooses by the rule of choiceOf without the fold's groups, and returns these judged
// by the choice. Strengths are in multiples of the fold's limit, since each fold has its own.
func (f fold) leftOut(of inspector) ([]tile, tileChoice, error) {
	c, err := choiceOf(func(rim, grid int, low float64) ([]tile, error) {
		tiles, err := of(rim, grid, low)
		return f.part(tiles, false), err
	}, io.Discard)
	if err != nil {
		return nil, c, err
	}
	all, err := of(c.rimPx, c.gridPx, c.kLow)
	if err != nil {
		return nil, c, err
	}
	out := f.part(all, true)
	for i := range out {
		out[i].judgeBy(digs, c.limit, c.shaped)
		out[i].top[digs] /= c.limit
	}
	return out, c, nil
}

// crossTiles adds the figures of all Blowhole and Free pictures, each judged by a recipe that
// was chosen without its group.
func (r *result) crossTiles(o options, progress io.Writer) error {
	all, err := pictures(filepath.Join(o.data, tilesName))
	if err != nil {
		return err
	}
	list := append(ofPictures(all, "Blowhole"), ofPictures(all, "Free")...)
	runs := 0
	inspect := remembered(func(rim, grid int, low float64) ([]tile, error) {
		t, _, _, err := newTileSet(o, withSettings(rim, grid, low))
		if err != nil {
			return nil, err
		}
		defer t.line.Close()
		runs++
		fmt.Fprintf(progress, "%s, cross-validation: rim %d px, grid %d px, k_low %g\n", tilesName, rim, grid, low)
		return t.inspect(list)
	})
	var tiles []tile
	choices := map[tileSettings]int{}
	folds := foldsOf(list)
	for _, f := range folds {
		judged, c, err := f.leftOut(inspect)
		if err != nil {
			return err
		}
		fmt.Fprintf(progress, "%s, cross-validation: %v scored by rim %d px, grid %d px, length %g px, k_low %g, limit %.1f\n",
			tilesName, f.names(), c.rimPx, c.gridPx, c.mostLengthPx, c.kLow, c.limit)
		choices[c.tileSettings]++
		tiles = append(tiles, judged...)
	}
	r.plain("folds of the cross-validation", float64(len(folds)), len(list),
		fmt.Sprintf("pictures; %d different choices, %d settings inspected; strengths are in multiples of each fold's limit. Numbers are chosen without the scored groups, by a rule and among candidates that, like the stages, were designed after both sides had been seen", len(choices), runs))
	_, err = r.blowholes(tiles, "cross-validated")
	return err
}

func (f fold) names() []string {
	var out []string
	for g := range f {
		out = append(out, g)
	}
	slices.Sort(out)
	return out
}
