// Package retest holds the showings of a unit against each other: which defects went when it
// was blown off or cleaned, which stay, and what the first showing is worth by those that
// stay. It takes no frames and changes no verdict.
//
// Each showing is registered with the latest complete one before it, by rotation and shift
// (pipeline.Register) or by the part's angle where a datum gives it. A defect of the first
// showing is removable when a later showing proves it gone or moved; every other one is
// permanent, also where nothing is known. A showing is complete when every view proved what
// it must and nothing failed: on a dark picture every defect would be gone.
package retest
