package server

import (
	"cmp"
	"context"
	"slices"

	"lapgate/pipeline"
	"lapgate/server/ledger"
	"lapgate/server/masters"
)

// standing is how a recipe's masters stand at one place.
type standing struct {
	ledger.MasterPlace
	recipe *pipeline.Recipe
	states []masters.State
}

// standings returns how masters stand wherever units or masters of their recipes were
// shown, by line, station and part. Empty strings stand for any.
func (d Deps) standings(ctx context.Context, part, line, station string) ([]standing, error) {
	var out []standing
	for _, r := range d.Book.withMasters() {
		if part != "" && r.Part != part {
			continue
		}
		places, err := d.placesOf(ctx, r)
		if err != nil {
			return nil, err
		}
		for _, p := range places {
			if line != "" && p.Line != line || station != "" && p.Station != station {
				continue
			}
			states, err := d.Gate.States(ctx, p, r, nil)
			if err != nil {
				return nil, err
			}
			out = append(out, standing{p, r, states})
		}
	}
	slices.SortStableFunc(out, func(a, b standing) int {
		return cmp.Or(cmp.Compare(a.Line, b.Line), cmp.Compare(a.Station, b.Station), cmp.Compare(a.Part, b.Part), cmp.Compare(a.Surface, b.Surface))
	})
	return out, nil
}

// placesOf returns where a recipe's units or masters were shown.
func (d Deps) placesOf(ctx context.Context, r *pipeline.Recipe) ([]ledger.MasterPlace, error) {
	out, err := d.Ledger.MasterPlaces(ctx, r.Part)
	if err != nil {
		return nil, err
	}
	for _, p := range d.Stations.places(r.Part) {
		if !slices.Contains(out, p) {
			out = append(out, p)
		}
	}
	return slices.DeleteFunc(out, func(p ledger.MasterPlace) bool { return r.Surface != "" && r.Surface != p.Surface }), nil
}

// withMasters returns the recipes that name masters: of each file the one that has been
// in force for longest, which judges the lots under way.
func (b *Book) withMasters() []*pipeline.Recipe {
	var out []*pipeline.Recipe
	for _, e := range b.snapshot() {
		if all := e.byAge(); len(all) > 0 && len(all[0].recipe.Masters) > 0 {
			out = append(out, all[0].recipe)
		}
	}
	return out
}

// because lists why stations hold, by place.
func because(list []standing) map[place][]string {
	out := map[place][]string{}
	for _, s := range list {
		for _, m := range s.states {
			if m.Reason != "" {
				where := place{s.Line, s.Station}
				out[where] = append(out[where], m.Reason+": "+m.Text)
			}
		}
	}
	return out
}
