// Package rules compiles and runs expressions over named measures (CEL, the Common
// Expression Language, with every number a double); it does not know what the names
// mean, nor what follows from a result.
//
// A name carries its unit: width_um, area_um2. Integer literals count as doubles, so
// 4*width_um and width_um >= 10 work and 1/2 is 0.5. Nothing that is not a finite number
// takes part: a NaN or infinite measure, a division by zero and an overflow are errors,
// never a comparison that happens to be false.
package rules
