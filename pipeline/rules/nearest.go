package rules

// Nearest returns the name that a mistyped word most likely meant: the first with the
// smallest edit distance (insert, delete, replace, swap of neighbours), if that is at
// most a third of the word's length and at least one; "" where nothing is near.
func Nearest(word string, names []string) string {
	best, at := "", max(len(word)/3, 1)+1
	for _, name := range names {
		if d := editDistance(word, name); d < at {
			best, at = name, d
		}
	}
	return best
}

// editDistance is the optimal string alignment distance between a and b, in bytes.
func editDistance(a, b string) int {
	two, one, now := make([]int, len(b)+1), make([]int, len(b)+1), make([]int, len(b)+1)
	for j := range one {
		one[j] = j
	}
	for i := 1; i <= len(a); i++ {
		now[0] = i
		for j := 1; j <= len(b); j++ {
			cost := 1
			if a[i-1] == b[j-1] {
				cost = 0
			}
			now[j] = min(one[j]+1, now[j-1]+1, one[j-1]+cost)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				now[j] = min(now[j], two[j-2]+1)
			}
		}
		two, one, now = one, now, two
	}
	return one[len(b)]
}
