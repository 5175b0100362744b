package configs

import (
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
)

func TestPeople(t *testing.T) {
	read := func(text string) ([]Person, error) {
		path := filepath.Join(t.TempDir(), "people.yaml")
		if err := os.WriteFile(path, []byte("format: 1\npeople:\n"+text), 0o600); err != nil {
			t.Fatal(err)
		}
		return LoadPeople(path)
	}
	got, err := read("  - {name: Q. Engineer, roles: [engineer]}\n  - {name: A. Pprover, roles: [engineer, approver]}\n")
	want := []Person{{"Q. Engineer", []string{"engineer"}}, {"A. Pprover", []string{"engineer", "approver"}}}
	if err != nil || !reflect.DeepEqual(got, want) {
		t.Errorf("got %+v, %v", got, err)
	}
	for text, is := range map[string]string{
		"  - {name: X, roles: [boss]}\n":                                       `people.yaml:3:23: people[0].roles[0]: got "boss", want one of operator, engineer, approver`,
		"  - {name: X, roles: []}\n":                                           "people[0]: no role is given",
		"  - {name: X, roles: [operator]}\n  - {name: x, roles: [operator]}\n": `people[1].name: "x" is listed twice`,
		"  - {name: \" \", roles: [operator]}\n":                               "people[0].name: no name is given",
	} {
		if _, err := read(text); err == nil || !strings.Contains(err.Error(), is) {
			t.Errorf("%s: got %v, want %s", text, err, is)
		}
	}
	dir := t.TempDir()
	if err := os.WriteFile(filepath.Join(dir, "people.yaml"), []byte("format: 1\npeople: [{name: X, roles: [boss]}]\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	if p, err := ValidateFolder(dir, nil); err != nil || len(p) != 1 || p[0].Path != "people[0].roles[0]" {
		t.Errorf("validated: %v, %v, want the role to be refused", p, err)
	}
	if got, err := LoadPeople(""); got != nil || err != nil {
		t.Errorf("no list: got %v, %v", got, err)
	}
}
