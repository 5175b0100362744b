package plan

import (
	"errors"
	"fmt"
	"math"
)

// Problem is one mistake in a file: where (a path such as
// processes[0].yield.value) and what was found and is allowed.
type Problem struct{ Path, Message string }

func (p *Problem) Error() string { return p.Path + ": " + p.Message }

// YAMLPath is the place in the notation of YAML path libraries.
func (p *Problem) YAMLPath() string { return "$." + p.Path }

// Problems takes an error of this package apart.
func Problems(err error) []*Problem {
	var one *Problem
	if joined, ok := err.(interface{ Unwrap() []error }); ok {
		var all []*Problem
		for _, e := range joined.Unwrap() {
			all = append(all, Problems(e)...)
		}
		return all
	}
	if errors.As(err, &one) {
		return []*Problem{one}
	}
	return nil
}

// checks gathers problems.
type checks struct{ found []error }

func (c *checks) want(ok bool, path, message string, args ...any) bool {
	if !ok {
		c.found = append(c.found, &Problem{path, fmt.Sprintf(message, args...)})
	}
	return ok
}

func (c *checks) err() error { return errors.Join(c.found...) }

func (c *checks) notNegative(path string, v float64) {
	c.want(v >= 0 && !math.IsInf(v, 0), path, "found %v; allowed: 0 or more", v)
}

func (c *checks) positive(path string, v float64) {
	c.want(v > 0 && !math.IsInf(v, 0), path, "found %v; allowed: above 0", v)
}

func (c *checks) share(path string, v float64) {
	c.want(v >= 0 && v <= 1, path, "found %v; allowed: 0 to 1", v)
}

func (c *checks) positiveShare(path string, v float64) {
	c.want(v > 0 && v <= 1, path, "found %v; allowed: above 0, at most 1", v)
}

func (c *checks) count(path string, k Count) {
	c.want(k.N >= 1, path, "found %d trials; allowed: 1 or more", k.N)
	c.want(k.K >= 0 && k.K <= k.N, path, "found %d of %d; allowed: 0 to %d", k.K, k.N, k.N)
}

func (c *checks) beta(path string, b Beta) {
	c.positive(path+".alpha", b.Alpha)
	c.positive(path+".beta", b.Beta)
}
