package dots

import (
	"fmt"
	"math"
)

// Placed is a dot with its column and row in the target's grid. They count from the dot
// nearest to the middle of all: columns towards +x, rows towards +y.
type Placed struct {
	Dot
	Column, Row int
}

// leastDots is how many dots of a grid must be found, and leastLines how many columns
// and rows.
const (
	leastDots  = 16
	leastLines = 3
)

// reachShare is how far, as a share of the pitch, a dot may lie from where its
// neighbour says it should.
const reachShare = 0.25

// vector is a step in px.
type vector struct{ x, y float64 }

// Assign gives dots of a square grid their columns and rows. It starts at the dot nearest
// to the middle that has four neighbours at right angles and walks from neighbour to
// neighbour; each step is predicted from the last one, so a grid that a lens bends is followed.
// Dots that no walk reaches are left out.
func Assign(found []Dot) ([]Placed, error) {
	if len(found) < leastDots {
		return nil, fmt.Errorf("dot target: found %d dots, want at least %d: more light, focus, or a target that fills the field", len(found), leastDots)
	}
	start, right, down, ok := seed(found)
	if !ok {
		return nil, fmt.Errorf("dot target: none of %d dots has four neighbours in a square grid", len(found))
	}
	placed := walk(found, start, right, down)
	columns, rows := lines(placed)
	if len(placed) < leastDots || columns < leastLines || rows < leastLines {
		return nil, fmt.Errorf("dot target: %d of %d dots lie on a grid of %d × %d, want at least %d on %d × %d",
			len(placed), len(found), columns, rows, leastDots, leastLines, leastLines)
	}
	return placed, nil
}

// seed returns a dot with four neighbours and the steps to the right and downwards.
func seed(found []Dot) (start int, right, down vector, ok bool) {
	mx, my := 0.0, 0.0
	for _, d := range found {
		mx, my = mx+d.X/float64(len(found)), my+d.Y/float64(len(found))
	}
	best := math.Inf(1)
	for i, d := range found {
		away := math.Hypot(d.X-mx, d.Y-my)
		if away >= best {
			continue
		}
		if r, b, fine := cross(found, i); fine {
			start, right, down, best, ok = i, r, b, away, true
		}
	}
	return start, right, down, ok
}

// cross looks for neighbours of dot i in four directions at right angles, the first
// being that of its nearest neighbour.
func cross(found []Dot, i int) (right, down vector, ok bool) {
	nearest, at := math.Inf(1), -1
	for j := range found {
		if d := distance(found[i], found[j]); j != i && d < nearest {
			nearest, at = d, j
		}
	}
	if at < 0 {
		return right, down, false
	}
	step := vector{found[at].X - found[i].X, found[at].Y - found[i].Y}
	var steps [4]vector
	for k := range steps {
		j := nearestTo(found, found[i].X+step.x, found[i].Y+step.y)
		if math.Hypot(found[j].X-found[i].X-step.x, found[j].Y-found[i].Y-step.y) > reachShare*nearest {
			return right, down, false
		}
		steps[k] = step
		step = vector{-step.y, step.x} // a quarter turn, +x towards +y
	}
	for k, s := range steps {
		if s.x > 0 && math.Abs(s.x) >= math.Abs(s.y) {
			return s, steps[(k+1)%4], true
		}
	}
	return right, down, false
}

func nearestTo(found []Dot, x, y float64) int {
	best, at := math.Inf(1), 0
	for i, d := range found {
		if away := (d.X-x)*(d.X-x) + (d.Y-y)*(d.Y-y); away < best {
			best, at = away, i
		}
	}
	return at
}

// walker is a dot from which the walk goes on, with the steps that hold there.
type walker struct {
	dot, column, row int
	right, down      vector
}

func walk(found []Dot, start int, right, down vector) []Placed {
	type cell struct{ column, row int }
	taken, used := map[cell]bool{{}: true}, map[int]bool{start: true}
	queue := []walker{{dot: start, right: right, down: down}}
	var out []Placed
	for len(queue) > 0 {
		w := queue[0]
		queue = queue[1:]
		here := found[w.dot]
		out = append(out, Placed{here, w.column, w.row})
		for _, turn := range [][2]int{{1, 0}, {-1, 0}, {0, 1}, {0, -1}} {
			dx := float64(turn[0])*w.right.x + float64(turn[1])*w.down.x
			dy := float64(turn[0])*w.right.y + float64(turn[1])*w.down.y
			next := nearestTo(found, here.X+dx, here.Y+dy)
			to := cell{w.column + turn[0], w.row + turn[1]}
			if used[next] || taken[to] || math.Hypot(found[next].X-here.X-dx, found[next].Y-here.Y-dy) > reachShare*math.Hypot(dx, dy) {
				continue
			}
			taken[to], used[next] = true, true
			queue = append(queue, w.after(turn, next, vector{found[next].X - here.X, found[next].Y - here.Y}))
		}
	}
	return out
}

// after returns the walker at the next dot; half of the step taken goes into the
// prediction.
func (w walker) after(turn [2]int, next int, step vector) walker {
	out := walker{dot: next, column: w.column + turn[0], row: w.row + turn[1], right: w.right, down: w.down}
	sign := float64(turn[0] + turn[1])
	if turn[0] != 0 {
		out.right = vector{(w.right.x + sign*step.x) / 2, (w.right.y + sign*step.y) / 2}
	} else {
		out.down = vector{(w.down.x + sign*step.x) / 2, (w.down.y + sign*step.y) / 2}
	}
	return out
}

// lines returns how many columns and rows are between the first and the last.
func lines(p []Placed) (columns, rows int) {
	var c0, c1, r0, r1 int
	for _, d := range p {
		c0, c1, r0, r1 = min(c0, d.Column), max(c1, d.Column), min(r0, d.Row), max(r1, d.Row)
	}
	return c1 - c0 + 1, r1 - r0 + 1
}
