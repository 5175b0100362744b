package pipeline

import (
	"slices"
	"strings"
)

// fuse replaces every row of stages that a fuser knows by the fuser's one stage.
func fuse(stages []built, fusers []Fuser, env Environment) ([]built, error) {
	for _, f := range fusers {
		at := rowAt(stages, f.Types)
		if at < 0 {
			continue
		}
		end := at + len(f.Types)
		needed := readsOf(stages[end:])
		if slices.ContainsFunc(f.Unfusable, func(plane string) bool { return needed[plane] }) {
			continue
		}
		one, err := fuseRow(stages[at:end], f, env, needed)
		if err != nil {
			return nil, err
		}
		if one != nil {
			stages = slices.Concat(stages[:at], []built{*one}, stages[end:])
		}
	}
	return stages, nil
}

func rowAt(stages []built, types []string) int {
	for at := 0; at+len(types) <= len(stages); at++ {
		same := true
		for i, t := range types {
			same = same && stages[at+i].factory.Type == t
		}
		if same {
			return at
		}
	}
	return -1
}

func readsOf(stages []built) map[string]bool {
	needed := map[string]bool{}
	for _, s := range stages {
		for _, r := range s.factory.Reads {
			needed[r] = true
		}
	}
	return needed
}

func fuseRow(row []built, f Fuser, env Environment, needed map[string]bool) (*built, error) {
	settings := make([]any, len(row))
	for i, s := range row {
		settings[i] = s.settings
	}
	stage, err := f.New(settings, env, needed)
	if err != nil || stage == nil {
		return nil, err
	}
	return &built{Factory{Type: f.Name + "(" + strings.Join(f.Types, "+") + ")"}, settings, stage}, nil
}
