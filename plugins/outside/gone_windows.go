package outside

// gone reports whether there is no process of that number; here it is not known.
func gone(int) bool { return false }
