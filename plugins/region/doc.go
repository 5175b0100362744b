// Package region is the stage that finds the part in a frame and lays the zones of
// the drawing over it. It looks for no defect and judges nothing but that the part is there.
package region
