// Package cv is what OpenCV lends: connected components as an outside truth, and a tuned
// chain of its functions as the yardstick for speed. No Mat leaves it.
package cv
