package configs

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"lapgate/pipeline"
)

// serverFileName is how the server's settings are called in a folder of configurations.
const serverFileName = "server.yaml"

// peopleFileName is how the list of people is called there.
const peopleFileName = "people.yaml"

// pluginsFileName is how the list of stages outside is called there.
const pluginsFileName = "plugins.yaml"

// ValidateFolder reads every *.yaml and *.yml file of a folder (not of folders in it) as
// the server would, server.yaml as its settings, people.yaml as its list of people,
// plugins.yaml as its list of stages outside and all others as recipes, and returns
// every problem in the order of files and lines. The error is for a folder that cannot
// be read or has no such file: then nothing was validated.
func ValidateFolder(dir string, catalogue *pipeline.Catalogue) ([]Problem, error) {
	files, err := os.ReadDir(dir)
	if err != nil {
		return nil, fmt.Errorf("cannot validate: %w", err)
	}
	var problems Problems
	subjects := map[string]string{}
	read := 0
	for _, f := range files {
		if ext := filepath.Ext(f.Name()); f.IsDir() || ext != ".yaml" && ext != ".yml" {
			continue
		}
		read++
		path := filepath.Join(dir, f.Name())
		if f.Name() == serverFileName {
			problems = append(problems, validateServer(path)...)
			continue
		}
		if f.Name() == pluginsFileName {
			problems = append(problems, validatePlugins(path)...)
			continue
		}
		if f.Name() == peopleFileName {
			if _, err := LoadPeople(path); err != nil {
				problems = append(problems, asProblems(path, err)...)
			}
			continue
		}
		problems = append(problems, validateRecipe(path, catalogue, subjects)...)
	}
	if read == 0 {
		return nil, fmt.Errorf("cannot validate: %s has no .yaml file", dir)
	}
	return problems.sorted(), nil
}

// validateServer looks at the file alone, not at environment or flags.
func validateServer(path string) Problems {
	s, src, err := LoadOver(path, DefaultServer())
	if err != nil {
		return asProblems(path, err)
	}
	var out Problems
	for _, p := range s.check() {
		out = append(out, src.Problem(p.Path, p.Found, p.Want))
	}
	return out
}

// validateRecipe notes in subjects which file is for which part, revision and surface.
func validateRecipe(path string, catalogue *pipeline.Catalogue, subjects map[string]string) Problems {
	r, err := LoadRecipe(path, catalogue)
	if err != nil {
		return asProblems(path, err)
	}
	subject := strings.Join([]string{r.Part, r.Revision, r.Surface}, "/")
	if other, taken := subjects[subject]; taken {
		src, _ := parse(path, r.Text)
		return Problems{src.Problem("part", fmt.Sprintf("part %s, revision %q, surface %q have a recipe in %s already", r.Part, r.Revision, r.Surface, other),
			"one file for each")}
	}
	subjects[subject] = path
	return nil
}

// asProblems returns the problems of an error, or one that says what kept the file from
// being read.
func asProblems(path string, err error) Problems {
	var all Problems
	if errors.As(err, &all) {
		return all
	}
	return Problems{{File: path, Found: err.Error()}}
}
