// Package fused finds what package raster finds in a frame, blob for blob, in one
// streaming pass over its rows, in C. It adds no method of its own: where the two differ,
// raster is right.
package fused
