package main

import (
	"os"
	"os/exec"
	"path/filepath"
	"testing"
)

func TestMain(m *testing.M) {
	serveIfAsked()
	os.Exit(m.Run())
}

func TestOutsideFigures(t *testing.T) {
	dir := t.TempDir()
	if out, err := exec.Command("go", "build", "-o", filepath.Join(dir, "lapgate-stage"), "lapgate/cmd/stage").CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	f, err := benchOutside(options{short: true, lapgated: filepath.Join(dir, "lapgated")})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%+v", f)
	for name, v := range f {
		if !(v.Value > 0) {
			t.Errorf("%s: got %g, want above 0", name, v.Value)
		}
	}
}
