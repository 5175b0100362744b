// Package files reads and writes frames as PGM, PNG, TIFF, JPEG (reading only) and
// raw binary with a JSON sidecar, every bit kept. It scales, stretches and guesses
// nothing: a count in the file is the count in the frame.
package files
