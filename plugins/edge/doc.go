// Package edge is the stage that finds chips in the outline of a round part's silhouette
// and measures how far each reaches in from the fitted circle. It sees nothing on the surface.
//
// The outline is followed to a fraction of a pixel in directions about a pixel apart. A
// chip is a run of directions in which it lies further in than min_reach_um; its width_um
// is its reach, its length_um how far it goes along the edge, its area that of the piece
// that is missing.
package edge
