// Package merge is the unit stage that joins what several views saw of one defect; it
// does not decide what kind of defect that is.
//
// Places are compared in station coordinates (µm from the centre of the region, v up).
// Two short defects are one when their centres lie within tolerance_um plus the smaller
// of their radii and their sizes are alike. A defect belongs to a long one when all of
// it, extent included, lies within tolerance_um of the long one's body, half its width
// to either side of its path: so pieces of a scratch join it and a dig wider than the
// scratch it touches does not. Two short defects of one view are never joined, pieces of
// a long one are. What is told by slope (dents, waviness) is never joined with what is told
// by light.
//
// The merged defect takes the measures of the view with the highest snr; where some view
// saw it in several pieces, those of the longest piece, so that a piece's length never
// stands for the whole; its slope is the steepest that was measured. What every view saw
// stays in the views' own lists. The result does not depend on the order of the views.
package merge
