// Package plan has the volume plan file and the study file as plain values,
// with their checks and what they know about each share. It computes no costs.
package plan
