// Package emva gives the figures of EMVA Standard 1288 from pairs of frames; arithmetic
// only.
package emva
