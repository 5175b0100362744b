// Package limits judges evidence against a drawing's limits written as rules; it sees
// no pixels and reads no files.
//
// A limit has a name, which becomes the reason, and one of three forms:
//
//	each:   about one defect. With at_most or at_least it is a number of that defect
//	        ("diameter_um"); without, a condition that breaks the limit ("width_um > 20").
//	value:  a number over the list of defects, held against at_most and at_least
//	        ("sum(defects.map(d, d.area_um2))").
//	broken: a condition over the list of defects that breaks the limit when it is true.
//
// zone and kind narrow a limit to the defects of one zone or kind before the expression
// sees them. Only the forms with at_most or at_least can say by how much they are broken.
//
// # The verdict
//
// Accept needs every limit kept and nothing that calls for a hold. Reject needs a limit
// that is provably broken: by defects of views all of whose proofs passed, with no stage
// failed and no frame refused. A missing view, a list that was cut or a low coverage do
// not undo that, since what was found was found; but then only a defect (each) or
// an upper limit (at_most) proves anything, not a lower limit or a free condition, which
// the part that was not seen could still put right. Everything else is a hold.
//
// # Size uncertainty
//
// With an uncertainty U stated (expanded, in the limit's unit or in % of the value), the
// decision rule is that of ISO 14253-1: kept is proven at or below at_most − U, broken is
// proven above at_most + U, and in between the verdict is hold. U of a sum is stated for
// the sum: an error of scale is common to all defects and adds linearly.
package limits
