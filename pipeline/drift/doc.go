// Package drift holds light, focus, scale and fixed pattern of a view against its
// calibration, each with bounds for a warning and for a hold. It finds no defect and
// remembers no unit.
package drift
