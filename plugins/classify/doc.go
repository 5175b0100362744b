// Package classify is the stage that names the kind of each defect by ordered rules over
// its measures; it does not decide whether the kind is allowed.
//
// The first rule whose condition is true gives the kind; where none is, default_kind does.
// A rule that cannot be evaluated fails the stage, and with it the unit is held.
package classify
