package server

import (
	"slices"
	"strings"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// People says who may do what. Names are taken as they are given: nobody proves to be
// who they say. The zero value lets every name do everything.
type People struct{ List []configs.Person }

// may refuses a person who is not listed with one of the roles.
func (p People) may(field, name string, roles ...string) error {
	if len(p.List) == 0 {
		return nil
	}
	plain := func(s string) string { return strings.ToLower(strings.Join(strings.Fields(s), " ")) }
	for _, one := range p.List {
		if plain(one.Name) != plain(name) {
			continue
		}
		if slices.ContainsFunc(one.Roles, func(r string) bool { return slices.Contains(roles, r) }) {
			return nil
		}
		return pipeline.Invalid("%s: %s is listed as %s, want a person who is %s", field, name, strings.Join(one.Roles, ", "), strings.Join(roles, " or "))
	}
	return pipeline.Invalid("%s: %q is not in the server's list of people, want one who is %s", field, name, strings.Join(roles, " or "))
}

func (p People) mayApprove(a ledger.Approval) error {
	if err := p.may("author", a.Author, configs.RoleEngineer, configs.RoleApprover); err != nil {
		return err
	}
	return p.may("person", a.Approver, configs.RoleApprover)
}

// mayAct refuses only who is not listed at all.
func (p People) mayAct(name string) error { return p.may("person", name, configs.Roles()...) }
