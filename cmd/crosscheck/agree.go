package main

import (
	"fmt"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Bounds on how far the fused pass may be from the reference.
const (
	nearThreshold = 0.02 // of a threshold: what is that close to it may fall on either side
	centreBound   = 0.1  // px
	sizeBound     = 0.02 // of diameter, length and width
	leastShare    = 0.99 // of the objects in both, with the same centre, with the same sizes
	leastPixels   = 0.97 // of the objects with the same pixels, but for those near k_low
	leastObjects  = 60   // on each surface, for the shares to say anything
)

// tally counts how the objects of the fused pass and of the reference compare on one
// surface. An object is one with a peak of k_high or more on either side.
type tally struct {
	surface          string
	reference, fused int
	near             int // on one side only, with a peak within 2 % of k_high
	pieces           int // in one piece on one side only, for pixels within 2 % of k_low
	missing          int // on one side only, and no such excuse
	pairs            int
	samePixels       int
	nearPixels       int // other pixels, all of them within 2 % of k_low
	otherPixels      int
	centres, sizes   int     // of all pairs: beyond the bounds
	worstCentre      float64 // px
	low              [2]int  // above k_low, noise included: of either side with a partner, and in all but peaks near k_low
}

// add compares the objects of one frame.
func (t *tally) add(f found) {
	snr := f.item.Planes[pipeline.SNRPlane].Pixels
	ours, theirs := labels(f.fused, snr.Width, snr.Height), labels(f.reference, snr.Width, snr.Height)
	for i, a := range f.fused {
		b, ok := partner(a, i, theirs, ours, f.reference)
		t.count(ok, a.PeakSNR)
		if a.PeakSNR < kHigh {
			continue
		}
		t.fused++
		if !ok || b.PeakSNR < kHigh {
			t.alone(a, theirs, ours, f.reference, snr)
			continue
		}
		t.pair(a, b, samePixels(a, b), near(ours, theirs, snr, a.spans, b.spans))
	}
	for i, b := range f.reference {
		a, ok := partner(b, i, ours, theirs, f.fused)
		t.count(ok, b.PeakSNR)
		if b.PeakSNR < kHigh {
			continue
		}
		t.reference++
		if !ok || a.PeakSNR < kHigh {
			t.alone(b, ours, theirs, f.fused, snr)
		}
	}
}

// count counts a thing above k_low, unless it is alone because its peak is near that.
func (t *tally) count(ok bool, peak float64) {
	if ok {
		t.low[0]++
	}
	if ok || peak > kLow*(1+nearThreshold) {
		t.low[1]++
	}
}

// alone counts an object that the other side does not have: its peak is near k_high, or it
// is a piece of one that the other side has whole, or the whole of pieces, for pixels near
// k_low, or it is missing.
func (t *tally) alone(a thing, other, own *labelled, list []thing, snr *raster.Plane) {
	k := other.most(a.spans)
	switch {
	case a.PeakSNR <= kHigh*(1+nearThreshold):
		t.near++
	case k >= 0 && list[k].PeakSNR >= kHigh && near(own, other, snr, a.spans, list[k].spans):
		t.pieces++
	default:
		t.missing++
	}
}

// labels numbers the pixels of each thing from 1.
func labels(list []thing, width, height int) *labelled {
	l := &labelled{width: width, of: make([]int32, width*height)}
	for i, b := range list {
		for _, s := range b.spans {
			for x := s.X0; x < s.X1; x++ {
				l.of[s.Y*width+x] = int32(i + 1)
			}
		}
	}
	return l
}

type labelled struct {
	width int
	of    []int32
}

// most returns the label on most of the pixels, or −1.
func (l *labelled) most(spans []raster.Span) int {
	counts, best := map[int32]int{}, int32(0)
	for _, s := range spans {
		for _, n := range l.of[s.Y*l.width+s.X0 : s.Y*l.width+s.X1] {
			if n == 0 {
				continue
			}
			if counts[n]++; best == 0 || counts[n] > counts[best] {
				best = n
			}
		}
	}
	return int(best) - 1
}

// partner returns the thing of the other side with which a, number i of its own, shares most
// pixels, where that holds the other way round too.
func partner(a thing, i int, other, own *labelled, list []thing) (thing, bool) {
	k := other.most(a.spans)
	if k < 0 || own.most(list[k].spans) != i {
		return thing{}, false
	}
	return list[k], true
}

// pair compares two views of one object.
func (t *tally) pair(a, b thing, same, near bool) {
	t.pairs++
	switch {
	case same:
		t.samePixels++
	case near:
		t.nearPixels++
	default:
		t.otherPixels++
	}
	off := math.Hypot(a.X-b.X, a.Y-b.Y)
	t.worstCentre = max(t.worstCentre, off)
	if !(off <= centreBound) {
		t.centres++
	}
	for _, s := range [][2]float64{{a.Diameter, b.Diameter}, {a.Length, b.Length}, {a.Width, b.Width}} {
		if !(math.Abs(s[0]-s[1]) <= sizeBound*s[1]) {
			t.sizes++
			break
		}
	}
}

// samePixels reports whether two objects have the same pixels; their runs are in order.
func samePixels(a, b thing) bool { return slices.Equal(a.spans, b.spans) }

// near reports whether those pixels of the spans that only one side has in an object are all
// within 2 % of k_low.
func near(ours, theirs *labelled, snr *raster.Plane, lists ...[]raster.Span) bool {
	for _, spans := range lists {
		for _, s := range spans {
			for x := s.X0; x < s.X1; x++ {
				i := s.Y*ours.width + x
				if (ours.of[i] == 0) != (theirs.of[i] == 0) && !(math.Abs(float64(snr.At(x, s.Y))-kLow) <= nearThreshold*kLow) {
					return false
				}
			}
		}
	}
	return true
}

// String is a line for people.
func (t tally) String() string {
	return fmt.Sprintf("fused pass and reference on %s: %d and %d objects, %d in both (%d with the same pixels, %d but for pixels within %g %% of k_low, %d otherwise), "+
		"%d on one side only within %g %% of k_high, %d in pieces, %d on one side only; centres beyond %g px: %d (worst %.3f), sizes beyond %g %%: %d; all above k_low: %d of %d have a partner",
		t.surface, t.fused, t.reference, t.pairs, t.samePixels, t.nearPixels, 100*nearThreshold, t.otherPixels, t.near, 100*nearThreshold, t.pieces, t.missing,
		centreBound, t.centres, t.worstCentre, 100*sizeBound, t.sizes, t.low[0], t.low[1])
}

// check says what is beyond the bounds.
func (t tally) check() error {
	all := t.fused + t.reference
	for _, c := range []struct {
		off, of int
		least   float64
		what    string
	}{
		{t.missing, all, leastShare, "objects are on one side only, with peaks not near the threshold"},
		{t.low[1] - t.low[0], t.low[1], leastShare, "objects above k_low are on one side only"},
		{t.otherPixels, t.pairs, leastPixels, "objects have other pixels, and not only near k_low"},
		{t.centres, t.pairs, leastShare, fmt.Sprintf("centres differ by more than %g px", centreBound)},
		{t.sizes, t.pairs, leastShare, fmt.Sprintf("sizes differ by more than %g %%", 100*sizeBound)},
	} {
		if float64(c.off) > (1-c.least)*float64(c.of) {
			return fmt.Errorf("%s: %d of %d %s; want at most %.0f %%", t.surface, c.off, c.of, c.what, 100*(1-c.least))
		}
	}
	if t.pairs < leastObjects {
		return fmt.Errorf("%s: %d objects in common, want at least %d to compare", t.surface, t.pairs, leastObjects)
	}
	return nil
}
