package configs

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/plugins/blobs"
	"lapgate/plugins/classify"
	"lapgate/plugins/flatfield"
	"lapgate/plugins/merge"
)

const (
	badFolder  = "../testdata/configs/bad"
	goldenFile = "../testdata/golden/validate.golden"
)

func realStages(t *testing.T) *pipeline.Catalogue {
	t.Helper()
	c, err := pipeline.NewCatalogue([]pipeline.Factory{flatfield.Factory, blobs.Factory, merge.Factory(), classify.Factory()}, nil)
	must(t, err)
	return c
}

// The golden file is the answer to every mistake, one small file each, named after it.
// Rewrite it with -update and read the difference.
func TestBadConfigs(t *testing.T) {
	problems, err := ValidateFolder(badFolder, realStages(t))
	must(t, err)
	var got strings.Builder
	told := map[string]bool{}
	for _, p := range problems {
		told[p.File] = true
		p.File = filepath.Base(p.File)
		p.Found = strings.ReplaceAll(p.Found, badFolder+"/", "")
		got.WriteString(p.Error() + "\n")
	}
	files, err := filepath.Glob(badFolder + "/*.yaml")
	must(t, err)
	for _, f := range files {
		if !told[f] && filepath.Base(f) != "same_part_1.yaml" {
			t.Errorf("%s was accepted", f)
		}
	}
	if *update {
		must(t, os.WriteFile(goldenFile, []byte(got.String()), 0o644))
		return
	}
	want, err := os.ReadFile(goldenFile)
	must(t, err)
	if got.String() != string(want) {
		t.Errorf("got\n%s\nwant\n%s", got.String(), want)
	}
}

func TestGoodConfigs(t *testing.T) {
	problems, err := ValidateFolder("../testdata/configs/good", realStages(t))
	if err != nil || len(problems) != 0 {
		t.Errorf("got %v, %v; want nothing to be wrong", problems, err)
	}
}

func TestValidateServerSettings(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "server.yaml")
	save(t, path, []byte("format: 1\nworkers: -1\n"))
	problems, err := ValidateFolder(dir, nil)
	if err != nil || len(problems) != 1 || problems[0].Error() != path+":2:10: workers: got -1, want 0 to 1024" {
		t.Errorf("got %v, %v", problems, err)
	}
	save(t, path, DefaultServerFile)
	if problems, err := ValidateFolder(dir, nil); err != nil || len(problems) != 0 {
		t.Errorf("the default file: got %v, %v", problems, err)
	}
}

func TestNothingToValidate(t *testing.T) {
	dir := t.TempDir()
	for _, d := range []string{dir, filepath.Join(dir, "none")} {
		if _, err := ValidateFolder(d, nil); err == nil {
			t.Errorf("%s was said to be valid", d)
		}
	}
}
