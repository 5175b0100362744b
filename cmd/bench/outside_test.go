package main

import (
	"os"
	"testing"
)

func TestMain(m *testing.M) {
	serveIfAsked()
	os.Exit(m.Run())
}

func TestOutsideFigures(t *testing.T) {
	f, err := benchOutside(options{short: true})
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
