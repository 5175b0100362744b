package lines

// Lay is the texture that the spread of the line sums shows.
type Lay struct{}
