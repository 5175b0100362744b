// Package pipeline is the vocabulary and the engine of lapgate: frames, regions,
// defects, evidence, judgements, recipes and stages, and the code that builds and
// runs a recipe. It names no stage, judges no limit and reads no file; the Judge, the
// Fusers and the Allocator are given to it.
package pipeline
