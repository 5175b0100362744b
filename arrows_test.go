package lapgate_test

import (
	"go/parser"
	"go/token"
	"io/fs"
	"os"
	"os/exec"
	"path"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

const module = "lapgate"

// arrows says which folders of this module, and which of the watched outside packages,
// each folder may import. "x/..." stands for the folders below x, as a key for those
// without a line of their own.
var arrows = map[string][]string{
	"pipeline":                  {"pipeline/raster"},
	"pipeline/raster":           {},
	"pipeline/raster/files":     {"pipeline/raster"},
	"pipeline/raster/drive":     {},
	"pipeline/raster/fused":     {"pipeline/raster"},
	"pipeline/raster/lines":     {"pipeline/raster"},
	"pipeline/raster/cv":        {"pipeline/raster", gocv},
	"pipeline/rules":            {cel},
	"pipeline/limits":           {"pipeline", "pipeline/rules"},
	"pipeline/render":           {"pipeline", "pipeline/raster"},
	"pipeline/calibrate":        {"pipeline", "pipeline/raster", "pipeline/raster/files", "pipeline/calibrate/...", "pipeline/drift"},
	"pipeline/calibrate/emva":   {},
	"pipeline/calibrate/dots":   {"pipeline", "pipeline/raster"},
	"pipeline/drift":            {"pipeline", "pipeline/raster"},
	"plugins/...":               {"pipeline", "pipeline/drift", "pipeline/raster", "pipeline/raster/fused", "pipeline/raster/lines", "pipeline/raster/cv", "pipeline/rules"},
	"plugins/detect":            {"pipeline", "pipeline/raster/fused", "pipeline/raster", "plugins/flatfield", "plugins/darkfield", "plugins/blobs"},
	"plugins/outside":           {"pipeline", "pipeline/raster", "proto/stagepb"},
	"plugins/stagetest":         {"pipeline", "pipeline/raster", "pipeline/render"},
	"plugins/builtin":           {"pipeline", "plugins/..."},
	"proto/inspectpb":           {"pipeline", "pipeline/raster"},
	"proto/stagepb":             {"pipeline", "pipeline/raster"},
	"server":                    {"server/...", "proto/inspectpb", "pipeline", "pipeline/limits", "configs"},
	"server/intake":             {"pipeline", "server/ledger", "server/images"},
	"server/ledger":             {"pipeline"},
	"server/images":             {"pipeline", "pipeline/raster", "pipeline/raster/files"},
	"server/masters":            {"pipeline", "server/ledger", "server/yield"},
	"server/retest":             {"pipeline", "server/ledger"},
	"server/rejudge":            {"pipeline", "pipeline/limits", "server/ledger", "server/images"},
	"server/yield":              {},
	"server/study":              {"server/yield"},
	"server/volume":             {"server/yield", "server/study", "server/volume/..."},
	"server/volume/...":         {"server/yield", "server/volume/..."},
	"server/alarm":              {"pipeline", "server/yield", "server/ledger", "pipeline/rules"},
	"server/export":             {"server/yield", "server/ledger", "pipeline/rules"},
	"server/report":             {"pipeline", "pipeline/calibrate", "pipeline/calibrate/emva", "pipeline/calibrate/dots", "pipeline/raster", "pipeline/raster/files", "pipeline/limits", "server/yield", "server/study", "server/volume", "server/volume/..."},
	"server/web":                {"proto/inspectpb"},
	"configs":                   {"pipeline", "pipeline/limits", "pipeline/rules", viper, yamlLibrary},
	"cmd/...":                   {"pipeline", "pipeline/...", "plugins/...", "proto/...", "server", "server/...", "configs"},
	"cmd/lapgate":               {"proto/inspectpb", "pipeline", "pipeline/raster", "pipeline/raster/files", "pipeline/render", "configs", "server/yield", "server/study", "server/volume", "server/volume/...", "server/report", "cmd/lapgate/..."},
	"cmd/lapgate/...":           {"pipeline", "pipeline/raster", "pipeline/raster/files"},
	"pipeline/raster/cv/...":    {},
	"pipeline/raster/files/...": {},
}

// The watched outside packages: each may be imported only where arrows says so.
const (
	gocv        = "gocv.io/x/gocv"
	viper       = "github.com/spf13/viper"
	cel         = "cel.dev/cel-go"
	yamlLibrary = "github.com/goccy/go-yaml"
)

// topFolders are all that may stand at the top beside files.
var topFolders = []string{".ci", ".git", "build", "cmd", "configs", "pipeline", "plugins", "proto", "server", "testdata"}

func TestArrows(t *testing.T) {
	eachPackageFile(t, func(file, dir string) {
		may, ok := allowedFor(dir)
		if !ok {
			t.Errorf("%s: folder %s has no line in arrows", file, dir)
			return
		}
		f, err := parser.ParseFile(token.NewFileSet(), file, nil, parser.ImportsOnly)
		if err != nil {
			t.Error(err)
			return
		}
		for _, im := range f.Imports {
			s, _ := strconv.Unquote(im.Path.Value)
			if to, watched := target(s); watched && !allowed(may, to) {
				t.Errorf("%s imports %s; %s may import %q", file, to, dir, may)
			}
		}
	})
}

func TestTopFolders(t *testing.T) {
	entries, err := os.ReadDir(".")
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range entries {
		if e.IsDir() && !slices.Contains(topFolders, e.Name()) {
			t.Errorf("folder %s stands at the top; want only %v", e.Name(), topFolders)
		}
	}
}

// TestEveryPackageHasItsSentence wants a package comment in each package.
func TestEveryPackageHasItsSentence(t *testing.T) {
	documented := map[string]bool{}
	eachPackageFile(t, func(file, dir string) {
		f, err := parser.ParseFile(token.NewFileSet(), file, nil, parser.ParseComments|parser.PackageClauseOnly)
		if err != nil {
			t.Error(err)
			return
		}
		documented[dir] = documented[dir] || f.Doc != nil || strings.HasPrefix(dir, "proto/")
	})
	for dir, ok := range documented {
		if !ok {
			t.Errorf("package %s has no package comment", dir)
		}
	}
}

// TestClientIsPureGo lists what the line's client is built from on a Windows line PC.
func TestClientIsPureGo(t *testing.T) {
	cmd := exec.Command("go", "list", "-deps", "./cmd/lapgate")
	cmd.Env = append(os.Environ(), "CGO_ENABLED=0", "GOOS=windows", "GOFLAGS=-buildvcs=false")
	out, err := cmd.CombinedOutput()
	if err != nil {
		t.Fatalf("go list: %v\n%s", err, out)
	}
	for _, dep := range strings.Fields(string(out)) {
		if dep == gocv || dep == "runtime/cgo" || dep == module+"/pipeline/raster/cv" || dep == module+"/pipeline/raster/fused" || dep == module+"/pipeline/raster/lines" {
			t.Errorf("cmd/lapgate depends on %s", dep)
		}
	}
}

func eachPackageFile(t *testing.T, visit func(file, dir string)) {
	t.Helper()
	err := filepath.WalkDir(".", func(file string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() && (d.Name() == "build" || d.Name() == ".git" || d.Name() == "testdata" && file != "." || d.Name() == "tools") {
			return filepath.SkipDir
		}
		if !d.IsDir() && strings.HasSuffix(file, ".go") && !strings.HasSuffix(file, "_test.go") {
			visit(file, path.Dir(filepath.ToSlash(file)))
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}

func allowedFor(dir string) ([]string, bool) {
	if may, ok := arrows[dir]; ok {
		return may, true
	}
	for up := path.Dir(dir); up != "."; up = path.Dir(up) {
		if may, ok := arrows[up+"/..."]; ok {
			return may, true
		}
	}
	return nil, false
}

// target returns the folder or watched package that import path s names.
func target(s string) (string, bool) {
	for _, w := range []string{gocv, viper, cel, yamlLibrary} {
		if s == w || strings.HasPrefix(s, w+"/") {
			return w, true
		}
	}
	return strings.CutPrefix(s, module+"/")
}

func allowed(may []string, to string) bool {
	return slices.ContainsFunc(may, func(m string) bool {
		base, below := strings.CutSuffix(m, "/...")
		return m == to || below && strings.HasPrefix(to, base+"/")
	})
}
