package main

import (
	"cmp"
	"fmt"
	"slices"

	"lapgate/server/yield"
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

// exposures sorts the pictures of each group by their numbers and parts them into tiles: the
// exposure number, which rises from picture to picture of one tile, starts anew with the next.
func exposures(tiles []tile) ([][]tile, error) {
	var out [][]tile
	for _, group := range byGroup(tiles) {
		type shot struct {
			tile
			exposure, number int
		}
		var shots []shot
		for _, t := range group {
			s := shot{tile: t}
			if _, err := fmt.Sscanf(t.file, "exp%d_num_%d", &s.exposure, &s.number); err != nil {
				return nil, fmt.Errorf("%s: want a name like exp1_num_4727.jpg: %w", t.file, err)
			}
			shots = append(shots, s)
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

// verdicts adds on how many of the defective tiles with several exposures every one of them
// has the same verdict, and on how many all are rejected.
func (r *result) exposureVerdicts(name string, bad []tile, k kinds) error {
	shown, err := exposures(bad)
	if err != nil {
		return err
	}
	several, constant, caught := 0, 0, 0
	for _, t := range shown {
		if len(t) < 2 {
			continue
		}
		several++
		rejected := 0
		for _, x := range t {
			if x.rejected[k] {
				rejected++
			}
		}
		if rejected == 0 || rejected == len(t) {
			constant++
		}
		if rejected == len(t) {
			caught++
		}
	}
	if several == 0 {
		return nil
	}
	if _, err := r.share("verdict constant over exposures "+name, constant, several, "tiles with several exposures"); err != nil {
		return err
	}
	_, err = r.share("rejected at every exposure "+name, caught, several, "tiles with several exposures")
	return err
}

// alarms adds the share of clean pictures that are rejected, with a bootstrap over groups.
func (r *result) alarms(name string, clean []tile, k kinds) {
	groups := byGroup(clean)
	share := func(tiles []tile) float64 {
		n := 0
		for _, t := range tiles {
			if t.rejected[k] {
				n++
			}
		}
		return float64(n) / float64(max(len(tiles), 1))
	}
	ends := bootstrapBoth(len(groups), 0, func(i, _ []int) float64 { return share(drawn(groups, i)) })
	r.between("clean pictures rejected, "+name, share(clean), yield.Interval{Low: ends.Low, High: ends.High}, len(clean), fmt.Sprintf("pictures; %d groups, bootstrap over them", len(groups)))
}
