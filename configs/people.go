package configs

import (
	"fmt"
	"slices"
	"strings"
)

// Roles of people.
const (
	RoleOperator = "operator" // closes holds, notes changes of a station
	RoleEngineer = "engineer" // also writes recipes
	RoleApprover = "approver" // also approves recipes of others
)

// Roles lists the roles.
func Roles() []string { return []string{RoleOperator, RoleEngineer, RoleApprover} }

// Person is somebody whose name may be given to the server.
type Person struct {
	Name  string
	Roles []string
}

// peopleFile is the list of people as it is written.
type peopleFile struct{ People []Person }

// LoadPeople reads the list of people. An empty path is no list.
func LoadPeople(path string) ([]Person, error) {
	if path == "" {
		return nil, nil
	}
	w, src, err := Load[peopleFile](path)
	if err != nil {
		return nil, err
	}
	var problems Problems
	wrong := func(bad bool, at, found, want string) {
		if bad {
			problems = append(problems, src.Problem(at, found, want))
		}
	}
	wrong(len(w.People) == 0, "people", "nobody is listed", "at least one person; leave the setting empty to let every name do everything")
	for i, p := range w.People {
		at := index("people", i)
		wrong(strings.TrimSpace(p.Name) == "", at+".name", "no name is given", "the name that the person gives")
		wrong(slices.ContainsFunc(w.People[:i], func(o Person) bool { return strings.EqualFold(o.Name, p.Name) }), at+".name",
			fmt.Sprintf("%q is listed twice", p.Name), "it once, with all roles")
		wrong(len(p.Roles) == 0, at, "no role is given", "one of "+strings.Join(Roles(), ", "))
		for j, r := range p.Roles {
			wrong(!slices.Contains(Roles(), r), index(at+".roles", j), fmt.Sprintf("got %q", r), "one of "+strings.Join(Roles(), ", "))
		}
	}
	return w.People, problems.err()
}
