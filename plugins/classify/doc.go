// Package classify is the stage that names the kind of each defect by ordered rules over
// its measures; it does not decide whether the kind is allowed.
//
// Dust is told from damage by how it looks: a fibre is long and bends back (elongation, coil),
// or long and seen alike from every side (views_seen); a particle is bright and not round. One
// showing alone does not prove it: pipeline.Register tells what went when the part was cleaned.
//
// The first rule whose condition is true gives the kind; where none is, default_kind does.
// A rule that cannot be evaluated fails the stage, and with it the unit is held.
package classify
