package pipeline

import "fmt"

// Recipe is the file for one part number: views, stages and limits. It holds what
// the engine needs; how it was written is the reader's business.
type Recipe struct {
	Part, Revision, Surface string
	Text                    []byte // the file as it was read
	TextHash                string // "sha256:" + hex of Text
	File                    string
	Views                   []RecipeView
	Unit                    []StageSpec // unit scope: classify, merge …
	Judge                   Judge       // from the limits
	MinCoverage             float64     // share below which a unit is held
	MaxAttempts             int         // showings of a unit's surface; 0 = no limit
	ViewTimeoutMS           int         // how long to wait for all views of a showing
	Masters                 []MasterSpec
}

// Verdict judges evidence: the limits, then whatever keeps an accept back. It is a pure
// function of both.
func (r *Recipe) Verdict(e Evidence) (Verdict, []Reason) {
	verdict, reasons := r.Judge.Judge(e)
	if holds := HoldReasons(e); verdict == Accept && len(holds) > 0 {
		verdict, reasons = Hold, append(reasons, holds...)
	}
	if verdict == Accept && e.Coverage < r.MinCoverage {
		verdict = Hold
		reasons = append(reasons, Reason{Name: ReasonCoverage, Verdict: Hold, Value: e.Coverage, Limit: r.MinCoverage,
			Over: e.Coverage - r.MinCoverage, Text: fmt.Sprintf("inspected %.4f of the region, want %.4f%s", e.Coverage, r.MinCoverage, CoverageCause(e))})
	}
	return verdict, reasons
}

// RecipeView is one view of a recipe.
type RecipeView struct {
	Name          string
	Light         string
	Frames        int     // frames in the view, from 1
	NoCalibration bool    // the stated choice "none"
	NoProofs      bool    // the stated choice that the view need prove nothing
	UMPerPx       float64 // stated scale; 0 = the calibration's
	RotationDeg   float64
	Mirror        bool
	Stages        []StageSpec
}

// Decode lays the settings of a file over the value that dst points to. It refuses
// unknown keys and wrong types, with file, line and column in the error.
type Decode func(dst any) error

// StageSpec is a stage as a recipe asks for it.
type StageSpec struct {
	Type   string
	Decode Decode                  // nil = all defaults
	Where  string                  // file:line:column of the stage, for messages
	Locate func(key string) string // file:line:column of one of its settings; may be nil
}
