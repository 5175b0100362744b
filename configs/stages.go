package configs

import (
	"errors"
	"fmt"
	"reflect"
	"regexp"
	"strings"

	"lapgate/pipeline"
	"lapgate/pipeline/rules"
)

// stages turns a list of mappings, each with its stage's type beside its settings, into
// stages that the engine can build.
func (c *recipeReader) stages(list []settings, path string, scope pipeline.Scope) []pipeline.StageSpec {
	var out []pipeline.StageSpec
	for i, s := range list {
		at := index(path, i)
		if s.node == nil {
			continue // reported already
		}
		typ, ok := c.stageType(s, at)
		if !ok {
			continue
		}
		spec := pipeline.StageSpec{Type: typ, Where: c.src.At(at), Decode: c.decode(s),
			Locate: func(key string) string { return c.src.At(join(at, key)) }}
		if c.catalogue != nil {
			c.checkStage(spec, at, scope)
		}
		out = append(out, spec)
	}
	return out
}

func (c *recipeReader) stageType(s settings, at string) (string, bool) {
	n := child(s.node, "type")
	if n == nil {
		want := "type: and one of the stages"
		if c.catalogue != nil {
			want = "type: and one of " + strings.Join(c.catalogue.Types(), ", ")
		}
		c.wrong(true, at, "the stage has no type", want)
		return "", false
	}
	var typ string
	r := &reader{file: c.src.File}
	r.lay(n, reflect.ValueOf(&typ).Elem(), at+".type")
	c.problems = append(c.problems, r.problems...)
	return typ, len(r.problems) == 0
}

// decode returns the Decode of one stage: its settings laid over the value given.
func (c *recipeReader) decode(s settings) pipeline.Decode {
	return func(dst any) error {
		r := &reader{file: c.src.File, skip: map[string]bool{join(s.path, "type"): true}}
		r.lay(s.node, reflect.ValueOf(dst).Elem(), s.path)
		return r.problems.err()
	}
}

// checkStage lays the settings over the factory's defaults and checks them, without
// building the stage: that may need a calibration.
func (c *recipeReader) checkStage(spec pipeline.StageSpec, at string, scope pipeline.Scope) {
	f, err := c.catalogue.Factory(spec.Type)
	if err != nil {
		found := fmt.Sprintf("there is no stage type %q", spec.Type)
		if near := rules.Nearest(spec.Type, c.catalogue.Types()); near != "" {
			found += fmt.Sprintf(" (did you mean %q?)", near)
		}
		c.wrong(true, at+".type", found, "one of "+strings.Join(c.catalogue.Types(), ", "))
		return
	}
	c.wrong(f.Scope != "" && f.Scope != scope, at+".type", fmt.Sprintf("stage %q works on one %s", spec.Type, f.Scope),
		fmt.Sprintf("it among the %s stages", f.Scope))
	if f.Defaults == nil {
		return
	}
	dst := reflect.New(reflect.TypeOf(f.Defaults))
	dst.Elem().Set(reflect.ValueOf(f.Defaults))
	if err := spec.Decode(dst.Interface()); err != nil {
		var all Problems
		if errors.As(err, &all) {
			c.problems = append(c.problems, all...)
		}
		return
	}
	if checker, ok := dst.Elem().Interface().(pipeline.Checker); ok {
		c.checked(at, checker.Check())
	} else if f.Check != nil {
		c.checked(at, f.Check(dst.Elem().Interface()))
	}
}

// keyed is how the error of a Checker starts: with the key it is about.
var keyed = regexp.MustCompile(`^([a-z][a-z0-9_]*(?:\[\d+\])?(?:\.[a-z][a-z0-9_]*(?:\[\d+\])?)*): (.*)$`)

// checked turns the error of a Checker, of which a joined one holds several, into problems.
func (c *recipeReader) checked(at string, err error) {
	if err == nil {
		return
	}
	if several, ok := err.(interface{ Unwrap() []error }); ok {
		for _, one := range several.Unwrap() {
			c.checked(at, one)
		}
		return
	}
	key, message := "", err.Error()
	if m := keyed.FindStringSubmatch(strings.SplitN(message, "\n", 2)[0]); m != nil {
		key, message = m[1], m[2]
	}
	path := at
	if key != "" {
		path = join(at, key)
	}
	var syntax rules.SyntaxErrors
	if errors.As(err, &syntax) {
		for _, e := range syntax {
			c.problems = append(c.problems, c.src.Within(path, e.Line, e.Column, e.Message, ""))
		}
		return
	}
	c.wrong(true, path, message, "")
}
