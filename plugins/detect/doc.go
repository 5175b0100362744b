// Package detect is the fuser that runs the stages flatfield, darkfield and blobs as one
// pass over the frame. It has no settings of its own and finds nothing those would not.
package detect
