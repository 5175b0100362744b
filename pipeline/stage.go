package pipeline

import (
	"context"
	"encoding/json"
	"fmt"
	"reflect"
	"sort"
	"strings"
)

// Stage is one step on the way from frames to evidence. Run is safe for concurrent
// calls on different Items. A Stage that holds something is also an io.Closer.
type Stage interface {
	Run(ctx context.Context, item *Item) error
}

// StageFunc is a function that is a Stage.
type StageFunc func(ctx context.Context, item *Item) error

// Run calls f.
func (f StageFunc) Run(ctx context.Context, item *Item) error { return f(ctx, item) }

// Scope says whether a stage works on one view or on the unit.
type Scope string

// The scopes.
const (
	ScopeView Scope = "view"
	ScopeUnit Scope = "unit"
)

// Environment is what a stage is built in.
type Environment struct {
	View         string
	Calibration  *Calibration                      // nil where the recipe states "none"
	Calibrations map[string]*Calibration           // of all views of the recipe, by name
	Geometry     Geometry                          // scale, rotation and mirror of the view; origin unknown yet
	ReadFile     func(name string) ([]byte, error) // files beside the recipe; nil = none
	// Earlier returns the headers of the latest frames of this view that are on record at the
	// station, most at most, oldest first; nil = nothing is on record.
	Earlier func(most int) ([]FrameHeader, error)
}

// Factory makes a stage of one type and describes it.
type Factory struct {
	Type     string
	Version  string
	Summary  string   // one sentence
	Scope    Scope    // empty = not known yet: a stage outside that has not started
	Reads    []string // planes and properties it needs
	Writes   []string // planes and properties it makes
	Stateful bool
	Defaults any // the settings when the file says nothing
	// New decodes settings over the defaults, checks them, and builds the stage. It
	// returns the effective settings too.
	New func(decode Decode, env Environment) (Stage, any, error)
	// Check says what is wrong with settings of a type that is no Checker itself, as a
	// Checker would; nil = nothing to say.
	Check func(settings any) error
}

// Checker is a settings type that can say what is wrong with it. The error starts
// with the key it is about: "k_low: got 9, want at most k_high (6)".
type Checker interface{ Check() error }

// Make completes a Factory whose settings are a C. Settings must be a struct without
// maps; slices in the default value are cloned by decoding over a copy.
func Make[C Checker](f Factory, defaults C, build func(C, Environment) (Stage, error)) Factory {
	f.Defaults = defaults
	f.New = func(decode Decode, env Environment) (Stage, any, error) {
		c := cloneSettings(defaults)
		if decode != nil {
			if err := decode(&c); err != nil {
				return nil, nil, err
			}
		}
		if err := c.Check(); err != nil {
			return nil, nil, &Error{Kind: InvalidKind, Err: err}
		}
		s, err := build(c, env)
		return s, c, err
	}
	return f
}

// cloneSettings copies a settings value deeply enough that decoding over the copy
// cannot reach the default's slices.
func cloneSettings[C any](c C) C {
	v := reflect.ValueOf(&c).Elem()
	if v.Kind() != reflect.Struct {
		return c
	}
	for i := range v.NumField() {
		if f := v.Field(i); f.Kind() == reflect.Slice && !f.IsNil() && f.CanSet() {
			s := reflect.MakeSlice(f.Type(), f.Len(), f.Len())
			reflect.Copy(s, f)
			f.Set(s)
		}
	}
	return c
}

// Fuser replaces a row of view stages by one pass. Types is the row it knows; New is
// given the effective settings of that row and which planes later stages read.
type Fuser struct {
	Name  string
	Types []string
	// New returns nil, nil when these settings cannot be fused; the row then stays.
	New func(settings []any, env Environment, needed map[string]bool) (Stage, error)
	// Unfusable lists planes which, if a later stage reads them, keep the row apart.
	Unfusable []string
}

// Catalogue is the list of stages and fusers that a program knows.
type Catalogue struct {
	stages map[string]Factory
	fusers []Fuser
}

// NewCatalogue returns a catalogue; two factories of one type are an error.
func NewCatalogue(stages []Factory, fusers []Fuser) (*Catalogue, error) {
	c := &Catalogue{stages: map[string]Factory{}, fusers: fusers}
	for _, f := range stages {
		if _, twice := c.stages[f.Type]; twice {
			return nil, fmt.Errorf("two factories for stage type %q", f.Type)
		}
		c.stages[f.Type] = f
	}
	return c, nil
}

// Types returns the stage types in alphabetical order.
func (c *Catalogue) Types() []string {
	out := make([]string, 0, len(c.stages))
	for t := range c.stages {
		out = append(out, t)
	}
	sort.Strings(out)
	return out
}

// Factory returns the factory of a type; the error lists what there is.
func (c *Catalogue) Factory(typ string) (Factory, error) {
	f, ok := c.stages[typ]
	if !ok {
		return Factory{}, Invalid("no stage type %q (have %s)", typ, strings.Join(c.Types(), ", "))
	}
	return f, nil
}

// canonical returns settings in a fixed form for hashing.
func canonical(settings any) []byte {
	b, err := json.Marshal(settings)
	if err != nil {
		panic("pipeline: settings that cannot be written as JSON: " + err.Error())
	}
	return b
}
