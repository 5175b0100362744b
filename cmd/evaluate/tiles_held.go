package main

import (
	"fmt"
	"maps"
	"slices"
	"strings"

	"lapgate/pipeline"
)

// judgeable returns the pictures that no reason to hold concerns: neither saturation, nor a
// failed proof, nor coverage.
func judgeable(tiles []tile) []tile {
	return slices.DeleteFunc(slices.Clone(tiles), func(t tile) bool { return len(t.holds) > 0 })
}

// held adds the share of pictures that have a reason to hold, and how many at each exposure.
func (r *result) held(name string, tiles []tile) error {
	n, of, why := map[int]int{}, map[int]int{}, map[string]int{}
	count := 0
	for _, t := range tiles {
		exposure, _, err := exposureOf(t.file)
		if err != nil {
			return err
		}
		of[exposure]++
		if len(t.holds) == 0 {
			continue
		}
		count++
		n[exposure]++
		for _, reason := range t.holds {
			why[reason]++
		}
	}
	var parts []string
	for _, e := range slices.Sorted(maps.Keys(of)) {
		parts = append(parts, fmt.Sprintf("%d: %d of %d", e, n[e], of[e]))
	}
	note := "pictures; by exposure " + strings.Join(parts, ", ")
	for _, reason := range slices.Sorted(maps.Keys(why)) {
		note += fmt.Sprintf("; %s %d", reason, why[reason])
	}
	r.plain("with a reason to hold, "+name, float64(count), len(tiles), note)
	return nil
}

// verdictShares adds the shares of clean pictures by verdict, with bootstraps over groups.
func (r *result) verdictShares(name string, tiles []tile, k kinds) {
	groups := byGroup(tiles)
	for _, v := range []struct {
		verdict pipeline.Verdict
		word    string
	}{{pipeline.Reject, "rejected"}, {pipeline.Hold, "held"}, {pipeline.Accept, "accepted"}} {
		share := func(of []tile) float64 {
			n := 0
			for _, t := range of {
				if t.verdict[k] == v.verdict {
					n++
				}
			}
			return float64(n) / float64(max(len(of), 1))
		}
		ends := bootstrap(len(groups), func(i []int) float64 { return share(drawn(groups, i)) })
		r.between("clean pictures "+v.word+", "+name, share(tiles), ends, len(tiles), fmt.Sprintf("pictures; %d groups, bootstrap over them", len(groups)))
	}
}
