package main

import (
	"cmp"
	"fmt"
	"slices"

	"lapgate/pipeline"
)

// limitFor is the smallest limit, to one decimal, that rejects at most the share of clean
// pictures with these strengths.
func limitFor(clean []float64, share float64) float64 {
	s := slices.Sorted(slices.Values(clean))
	kept := s[len(s)-1-int(share*float64(len(s)))]
	limit := float64(int(10*kept)) / 10
	for limit < kept {
		limit += 0.1
	}
	return limit
}

// exposureOf reads the numbers of the exposure and of the picture out of a file's name.
func exposureOf(file string) (exposure, number int, err error) {
	if _, err = fmt.Sscanf(file, "exp%d_num_%d", &exposure, &number); err != nil {
		err = fmt.Errorf("%s: want a name like exp1_num_4727.jpg: %w", file, err)
	}
	return exposure, number, err
}

// exposures sorts the pictures of each group by their numbers and parts them into tiles: the
// exposure number, which rises from picture to picture of one tile, starts anew with the next.
func exposures(tiles []tile) ([][]tile, error) {
	var out [][]tile
	for _, group := range byGroup(tiles) {
		type shot struct {
			tile
			exposure, number int
		}
		shots := make([]shot, len(group))
		for i, t := range group {
			var err error
			shots[i].tile = t
			if shots[i].exposure, shots[i].number, err = exposureOf(t.file); err != nil {
				return nil, err
			}
		}
		slices.SortFunc(shots, func(a, b shot) int { return cmp.Compare(a.number, b.number) })
		for i, s := range shots {
			if i == 0 || s.exposure <= shots[i-1].exposure {
				out = append(out, nil)
			}
			out[len(out)-1] = append(out[len(out)-1], s.tile)
		}
	}
	return out, nil
}

// overExposures counts tiles that were shown at several exposures.
type overExposures struct{ tiles, constant, neverAccepted, alwaysRejected, everRejected, alwaysAccepted int }

func countExposures(shown [][]tile, k kinds) overExposures {
	var c overExposures
	for _, t := range shown {
		if len(t) < 2 {
			continue
		}
		n := map[pipeline.Verdict]int{}
		for _, x := range t {
			n[x.verdict[k]]++
		}
		c.tiles++
		count := func(is bool, into *int) {
			if is {
				*into++
			}
		}
		count(len(n) == 1, &c.constant)
		count(n[pipeline.Accept] == 0, &c.neverAccepted)
		count(n[pipeline.Reject] == len(t), &c.alwaysRejected)
		count(n[pipeline.Reject] > 0, &c.everRejected)
		count(n[pipeline.Accept] == len(t), &c.alwaysAccepted)
	}
	return c
}

// exposureVerdicts adds what becomes of defective tiles with several exposures, and beside it
// of clean ones where any are given.
func (r *result) exposureVerdicts(name string, bad, clean []tile, k kinds) error {
	shown, err := exposures(bad)
	if err != nil {
		return err
	}
	beside, err := exposures(clean)
	if err != nil {
		return err
	}
	c, of := countExposures(shown, k), countExposures(beside, k)
	for _, f := range []struct {
		name    string
		count   int
		n       int
		subject string
	}{
		{"verdict constant over exposures ", c.constant, c.tiles, "defective"},
		{"never accepted, reject or hold at every exposure ", c.neverAccepted, c.tiles, "defective"},
		{"rejected at every exposure ", c.alwaysRejected, c.tiles, "defective"},
		{"clean, rejected at any exposure ", of.everRejected, of.tiles, "clean"},
		{"clean, accepted at every exposure ", of.alwaysAccepted, of.tiles, "clean"},
	} {
		if f.n == 0 {
			continue
		}
		if _, err := r.share(f.name+name, f.count, f.n, f.subject+" tiles with several exposures"); err != nil {
			return err
		}
	}
	return nil
}
