// Package drift holds light, focus, scale and fixed pattern of a view against its
// calibration. It finds no defect and remembers no unit.
package drift
