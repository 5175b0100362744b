// Package datum is the unit stage that finds how the part lies turned, by a mark in its
// edge or on its face, and gives every defect its place on the part. It judges no mark.
//
// The mean over a ring about the part's centre, direction by direction, is correlated
// with a box as wide as the mark. Where the highest place does not stand out of the rest, or
// another is nearly as high, the angle stays unknown and so do the places on the part.
package datum
