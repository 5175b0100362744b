// Package lines finds faint straight and gently curved lines in a picture of unit noise by
// summing along all of them, in C. It judges no defect and knows no µm.
//
// Sums run over strips of 128 rows and of 128 columns, along 512 slopes, by the approximate
// discrete Radon transform (Götz and Druckmüller 1996; Brady 1998; in strips with later
// refinement: Brandt and Dym 1999). What stands out against the spread of the sums of its
// own slope and place, which lay makes large, is refined to fractions of a pixel with both
// ends free, followed along its curve, and judged once more.
package lines
