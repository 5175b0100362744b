// Package masters decides when the masters of a recipe are due, what their showings
// prove, and whether a station may judge units. It sees no pixels and judges no unit.
package masters
