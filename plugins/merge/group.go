package merge

import (
	"cmp"
	"context"
	"slices"

	"lapgate/pipeline"
)

// group is what was seen of one imperfection.
type group []*seen

// pair is two defects that are the same; a < b.
type pair struct {
	a, b  int
	apart float64
}

// group joins pairs from the nearest to the farthest, unless two short defects of one
// view would come together. Ties go by the order of all, which is that of compareSeen.
func (s Settings) group(ctx context.Context, all []seen) ([]group, error) {
	var pairs []pair
	for a := range all {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		for b := a + 1; b < len(all); b++ {
			if d, same := s.same(&all[a], &all[b]); same {
				pairs = append(pairs, pair{a, b, d})
			}
		}
	}
	slices.SortFunc(pairs, func(p, q pair) int {
		return cmp.Or(cmp.Compare(p.apart, q.apart), cmp.Compare(p.a, q.a), cmp.Compare(p.b, q.b))
	})
	owner := make([]int, len(all))
	groups := make([]group, len(all))
	for i := range all {
		owner[i], groups[i] = i, group{&all[i]}
	}
	for _, p := range pairs {
		a, b := owner[p.a], owner[p.b]
		if a == b || groups[a].forbids(groups[b]) {
			continue
		}
		groups[a] = append(groups[a], groups[b]...)
		groups[b] = nil
		for i := range owner {
			if owner[i] == b {
				owner[i] = a
			}
		}
	}
	return slices.DeleteFunc(groups, func(g group) bool { return g == nil }), nil
}

// forbids reports whether joining would make one defect of two short ones that a single
// view told apart and that no long defect holds together.
func (g group) forbids(o group) bool {
	isLong := func(s *seen) bool { return s.long() }
	if slices.ContainsFunc(g, isLong) || slices.ContainsFunc(o, isLong) {
		return false
	}
	return slices.ContainsFunc(g, func(a *seen) bool {
		return slices.ContainsFunc(o, func(b *seen) bool { return a.View == b.View })
	})
}

// defect returns the merged defect.
func (g group) defect() pipeline.Defect {
	slices.SortFunc(g, func(a, b *seen) int { return compareSeen(*a, *b) })
	d := g.measured().Defect
	d.MergedFrom, d.SeenIn = nil, nil
	for _, s := range g {
		d.MergedFrom = append(d.MergedFrom, pipeline.Ref{View: s.View, ID: s.ID})
		d.SlopeMrad = max(d.SlopeMrad, s.SlopeMrad)
		if !slices.Contains(d.SeenIn, s.View) {
			d.SeenIn = append(d.SeenIn, s.View)
		}
	}
	return d
}

// measured returns the member whose measures stand for all.
func (g group) measured() *seen {
	views := map[string]int{}
	pieces := false
	for _, s := range g {
		views[s.View]++
		pieces = pieces || views[s.View] > 1
	}
	return slices.MaxFunc(g, func(a, b *seen) int {
		bySNR := cmp.Compare(a.SNR, b.SNR)
		if pieces {
			bySNR = cmp.Or(cmp.Compare(a.length(), b.length()), bySNR)
		}
		return cmp.Or(bySNR, cmp.Compare(a.AreaUM2, b.AreaUM2), -compareSeen(*a, *b))
	})
}
