// Package areas is the stage that finds what is larger than the background grid of the
// fine search: stains, fingerprints, films, matt places, missing pieces. It finds no
// scratch and no small dig.
//
// The corrected picture is reduced to cells (clipped mean, so that small defects do not
// count), a smooth surface is fitted to the region's cells without letting up to half of
// them pull it, and connected cells that stand out to either side become defects of kind
// stain. Their sizes are taken at half height of the reduced picture: to about half a
// cell. Where the rest of the surface is uneven too, as under a film, evenness is not proven.
package areas
