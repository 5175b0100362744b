package main

import (
	"fmt"
	"io"
	"slices"

	"lapgate/server/yield"
)

// evaluateTiles scores the recipe on tiles that its settings were not chosen on. Cracks,
// breaks and frays were not looked at when choosing, so all of them are scored.
func evaluateTiles(o options, progress io.Writer) (*result, error) {
	t, choose, score, err := newTileSet(o, nil)
	if err != nil {
		return nil, err
	}
	defer t.line.Close()
	fmt.Fprintf(progress, "%s: %d pictures\n", tilesName, len(choose)+len(score))
	chosen, err := t.inspect(choose)
	if err != nil {
		return nil, err
	}
	scored, err := t.inspect(score)
	if err != nil {
		return nil, err
	}
	limit := limitFor(strengths(ofClass(chosen, "Free"), anyKind), tilesFalseAlarms)
	judgeAny(chosen, limit)
	judgeAny(scored, limit)
	r := &result{}
	upper, err := r.blowholes(scored, "scored tiles")
	if err != nil {
		return nil, err
	}
	if _, err := r.blowholes(chosen, "tiles of the choice"); err != nil {
		return nil, err
	}
	r.plain("limit on any defect", limit, len(ofClass(chosen, "Free")), "sigma; rejects at most 5 % of the clean pictures of the choice")
	if err := r.anyDefect(scored, chosen); err != nil {
		return nil, err
	}
	r.atLeast("AUROC, Blowhole by digs, upper end", upper, 0.95)
	return r, r.crossTiles(o, progress)
}

// blowholes adds how the recipe, which looks for digs, fares on Blowhole and Free pictures:
// all of them, and those with nothing to hold. It returns the upper end of the first AUROC's
// interval.
func (r *result) blowholes(tiles []tile, which string) (float64, error) {
	const name = "Blowhole by digs"
	clean, holes := ofClass(tiles, "Free"), ofClass(tiles, "Blowhole")
	upper := r.class(name, holes, clean, which, digs)
	if err := r.held("Blowhole, "+which, holes); err != nil {
		return 0, err
	}
	if err := r.held("Free, "+which, clean); err != nil {
		return 0, err
	}
	r.class(name, judgeable(holes), judgeable(clean), which+", nothing to hold", digs)
	outside := slices.DeleteFunc(slices.Clone(holes), func(t tile) bool { return t.inRim })
	if rim := len(holes) - len(outside); rim > 0 {
		r.plain("Blowhole pictures with most of the defect in the rim, "+which, float64(rim), len(holes),
			fmt.Sprintf("pictures; the recipe does not look there, and nothing holds %d of them; missed above", len(judgeable(holes))-len(judgeable(outside))))
		r.class(name, outside, clean, which+", not in the rim", digs)
		r.class(name, judgeable(outside), judgeable(clean), which+", not in the rim, nothing to hold", digs)
	}
	r.verdictShares("by digs, "+which, clean, digs)
	r.verdictShares("by digs, "+which+", nothing to hold", judgeable(clean), digs)
	return upper, r.exposureVerdicts(name+", "+which, holes, clean, digs)
}

// anyDefect adds what one limit on all defects reaches, class by class.
func (r *result) anyDefect(scored, chosen []tile) error {
	clean := ofClass(scored, "Free")
	r.class("Blowhole by any defect", ofClass(scored, "Blowhole"), clean, "scored tiles", anyKind)
	r.verdictShares("by any defect, scored tiles", clean, anyKind)
	for _, other := range []string{"Crack", "Break", "Fray"} {
		all := append(ofClass(scored, other), ofClass(chosen, other)...)
		r.class(other+" by any defect", all, clean, "all, scored Free", anyKind)
		if err := r.held(other+", all", all); err != nil {
			return err
		}
		r.class(other+" by any defect", judgeable(all), judgeable(clean), "all, scored Free, nothing to hold", anyKind)
		if err := r.exposureVerdicts(other+" by any defect, all", all, nil, anyKind); err != nil {
			return err
		}
	}
	return nil
}

func ofClass(tiles []tile, class string) []tile {
	var out []tile
	for _, t := range tiles {
		if t.class == class {
			out = append(out, t)
		}
	}
	return out
}

// class adds AUROC and pixel F1 of one class against clean tiles, with bootstraps that
// draw groups within the class and within the clean tiles. It returns the upper end of
// the AUROC's interval.
func (r *result) class(name string, bad, clean []tile, which string, k kinds) float64 {
	if len(bad) == 0 || len(clean) == 0 {
		r.plain("no AUROC "+name+", "+which, 0, len(bad)+len(clean), fmt.Sprintf("pictures, %d of them defective: nothing to compare", len(bad)))
		return 0
	}
	badGroups, cleanGroups := byGroup(bad), byGroup(clean)
	both := func(of func(b, c []tile) float64) yield.Interval {
		return bootstrapBoth(len(badGroups), len(cleanGroups), func(i, j []int) float64 { return of(drawn(badGroups, i), drawn(cleanGroups, j)) })
	}
	tail := " " + name + ", " + which
	n, note := len(bad)+len(clean), fmt.Sprintf("pictures; %d + %d groups, bootstrap over them", len(badGroups), len(cleanGroups))
	area := func(b, c []tile) float64 { return auroc(strengths(b, k), strengths(c, k)) }
	ends := both(area)
	r.between("AUROC"+tail, area(bad, clean), ends, n, note)
	alone := func(b, _ []tile) float64 { return pixelsOf(b, k).f1() }
	r.between("pixel F1, without Free,"+tail, alone(bad, nil), both(alone), len(bad), "pictures; bootstrap over groups")
	all := func(b, c []tile) float64 { return pixelsOf(b, k).plus(pixelsOf(c, k)).f1() }
	r.between("pixel F1, with Free,"+tail, all(bad, clean), both(all), n, note)
	return ends.High
}

// drawn returns the tiles of the groups with these numbers.
func drawn(groups [][]tile, numbers []int) []tile {
	var out []tile
	for _, i := range numbers {
		out = append(out, groups[i]...)
	}
	return out
}

func byGroup(tiles []tile) [][]tile {
	at := map[string]int{}
	var out [][]tile
	for _, t := range tiles {
		if _, seen := at[t.group]; !seen {
			at[t.group] = len(out)
			out = append(out, nil)
		}
		out[at[t.group]] = append(out[at[t.group]], t)
	}
	return out
}

func strengths(tiles []tile, k kinds) []float64 {
	var out []float64
	for _, t := range tiles {
		out = append(out, t.top[k])
	}
	return out
}

// auroc is the share of pairs in which the bad one has the larger value, ties counting
// half (Mann–Whitney U over the number of pairs; Hanley and McNeil 1982).
func auroc(bad, clean []float64) float64 {
	sum := 0.0
	for _, b := range bad {
		for _, c := range clean {
			switch {
			case b > c:
				sum++
			case b == c:
				sum += 0.5
			}
		}
	}
	return sum / float64(len(bad)*len(clean))
}

// pixelScore counts pixels of the truth and of the marks.
type pixelScore struct{ both, marked, truth int }

// f1 is 2·both / (marked + truth), the Dice coefficient.
func (p pixelScore) f1() float64 { return 2 * float64(p.both) / float64(max(p.marked+p.truth, 1)) }

func (p pixelScore) plus(q pixelScore) pixelScore {
	return pixelScore{p.both + q.both, p.marked + q.marked, p.truth + q.truth}
}

// with adds a mark.
func (p pixelScore) with(f found) pixelScore {
	return p.plus(pixelScore{both: f.both, marked: f.marked})
}

func pixelsOf(tiles []tile, k kinds) pixelScore {
	var sum pixelScore
	for _, t := range tiles {
		sum = sum.plus(t.score[k])
	}
	return sum
}
