package main

import (
	"fmt"
	"io"
	"slices"

	"lapgate/pipeline"
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
	clean, holes := ofClass(scored, "Free"), ofClass(scored, "Blowhole")
	upper := r.class("Blowhole by digs", holes, clean, "scored tiles", digs)
	inside := slices.DeleteFunc(slices.Clone(holes), tile.inRim)
	r.plain("scored Blowhole pictures with most of the defect in the rim", float64(len(holes)-len(inside)), len(inside), "other pictures; the former count as missed above")
	r.class("Blowhole by digs", inside, clean, "scored, not in the rim", digs)
	r.alarms("by digs, scored tiles", clean, digs)
	r.alarms("by digs, tiles of the choice", ofClass(chosen, "Free"), digs)
	if err := r.exposureVerdicts("Blowhole by digs, scored tiles", holes, digs); err != nil {
		return nil, err
	}
	if err := r.exposureVerdicts("Blowhole by digs, tiles of the choice", ofClass(chosen, "Blowhole"), digs); err != nil {
		return nil, err
	}
	r.class("Blowhole by any defect", holes, clean, "scored tiles", anyKind)
	r.class("Blowhole by digs", ofClass(chosen, "Blowhole"), ofClass(chosen, "Free"), "tiles of the choice", digs)
	r.plain("limit on any defect", limit, len(ofClass(chosen, "Free")), "sigma; rejects at most 5 % of the clean pictures of the choice")
	r.alarms("by any defect, scored tiles", clean, anyKind)
	for _, other := range []string{"Crack", "Break", "Fray"} {
		all := append(ofClass(scored, other), ofClass(chosen, other)...)
		r.class(other+" by any defect", all, clean, "all, scored Free", anyKind)
		if err := r.exposureVerdicts(other+" by any defect, all", all, anyKind); err != nil {
			return nil, err
		}
	}
	r.atLeast("AUROC, Blowhole by digs, upper end", upper, 0.95)
	return r, nil
}

// inRim reports whether most of a tile's defect lies outside the region.
func (t tile) inRim() bool {
	region, inside := t.result.Item.Region.Inside(), 0
	for _, s := range t.mask.Spans() {
		for x := s.X0; x < s.X1; x++ {
			if region.At(x, s.Y) {
				inside++
			}
		}
	}
	return 2*inside < t.mask.Count()
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

func pixelsOf(tiles []tile, k kinds) pixelScore {
	var sum pixelScore
	for _, t := range tiles {
		sum = sum.plus(t.score[k])
	}
	return sum
}

// pixelScore counts the pixels of the defects that are marks.
func (t tile) pixelScore(mark func(pipeline.Defect) bool) pixelScore {
	var p pixelScore
	if t.mask != nil {
		p.truth = t.mask.Count()
	}
	for _, d := range t.result.Item.Defects {
		if !mark(d) {
			continue
		}
		for _, s := range t.pixels[d.ID] {
			p.marked += s.Len()
			for x := s.X0; x < s.X1 && t.mask != nil; x++ {
				if t.mask.At(x, s.Y) {
					p.both++
				}
			}
		}
	}
	return p
}
