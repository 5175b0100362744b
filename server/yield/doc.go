// Package yield turns counts into rates, intervals and control charts; it is arithmetic only
// and neither reads a ledger nor knows what a part is.
//
// Policy for every function here: an argument that cannot be a count, a rate or a confidence
// gives an error and no number. No trials at all is not an error: the rate is then NaN
// (nothing was seen) and its interval is [0, 1]. A run length of a chart that can never signal is +Inf.
package yield
