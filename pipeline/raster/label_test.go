package raster

import (
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"
)

// drawn returns a mask from rows of '#' and '.'.
func drawn(rows ...string) *Mask {
	m := NewMask(len(rows[0]), len(rows))
	for y, row := range rows {
		for x := range row {
			m.Set(x, y, row[x] == '#')
		}
	}
	return m
}

func TestComponentsOfADrawnMask(t *testing.T) {
	m := drawn(
		"##....#.",
		"#....#..",
		"....#..#",
		".##....#",
		"#..#....",
		"#..#.###",
		".##..#.#",
		".....###")
	var areas []int
	for _, c := range Components(m) {
		areas = append(areas, SpanArea(c))
	}
	if want := []int{3, 3, 2, 8, 8}; !reflect.DeepEqual(areas, want) {
		t.Errorf("areas %v, want %v", areas, want)
	}
}

// flood labels by filling, pixel by pixel: slow and obvious.
func flood(m *Mask) [][]Span {
	seen := NewMask(m.Width, m.Height)
	var out [][]Span
	for i := range m.Bits {
		if !m.Bits[i] || seen.Bits[i] {
			continue
		}
		one := NewMask(m.Width, m.Height)
		stack := []int{i}
		seen.Bits[i] = true
		for len(stack) > 0 {
			p := stack[len(stack)-1]
			stack = stack[:len(stack)-1]
			one.Bits[p] = true
			for k := range 9 {
				x, y := p%m.Width+k%3-1, p/m.Width+k/3-1
				if m.At(x, y) && !seen.At(x, y) {
					seen.Set(x, y, true)
					stack = append(stack, y*m.Width+x)
				}
			}
		}
		out = append(out, one.Spans())
	}
	return out
}

func TestComponentsEqualFloodFill(t *testing.T) {
	random := rand.New(rand.NewPCG(3, 4))
	for round := range 300 {
		m := NewMask(1+random.IntN(40), 1+random.IntN(40))
		density := 0.1 + 0.8*random.Float64()
		for i := range m.Bits {
			m.Bits[i] = random.Float64() < density
		}
		if got, want := Components(m), flood(m); len(got)+len(want) > 0 && !reflect.DeepEqual(got, want) {
			t.Fatalf("round %d: %d sets, flood fill %d", round, len(got), len(want))
		}
	}
}

func TestLabelKeepsWhatReachesTheHighThreshold(t *testing.T) {
	p := NewPlane(8, 4)
	rows := []string{"44500044", "00060000", "40000000", "44600005"}
	for y, r := range rows {
		for x := range r {
			p.Set(x, y, float32(strings.IndexByte("0123456789", r[x])))
		}
	}
	got := Label(p, 4, 6)
	want := []Blob{
		{Spans: []Span{{0, 0, 3}, {1, 3, 4}}, Peak: 6, PeakX: 3, PeakY: 1},
		{Spans: []Span{{2, 0, 1}, {3, 0, 3}}, Peak: 6, PeakX: 2, PeakY: 3},
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("got %+v, want %+v", got, want)
	}
}
