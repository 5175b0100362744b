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
	centreBound   = 0.1  // px, of every object in both
	sizeBound     = 0.02 // of the reference's diameter, length and width at half height, of every object in both
	leastPixels   = 0.97 // of the objects with the same pixels, but for those near k_low
	leastObjects  = 60   // on each surface, to say anything
)

// tally counts how what the fused pass finds and what the reference finds compare on one
// surface. An object is a thing with a peak of k_high or more on either side.
type tally struct {
	surface          string
	frame            string // looked at now
	reference, fused int
	near             int // objects on one side only, with a peak within 2 % of k_high
	pieces           int // things in one piece on one side only, for pixels within 2 % of k_low
	faint            int // things on one side only, with a peak within 2 % of k_low
	pairs            int // objects in both
	low              int // things with a partner, noise included; each side counts
	samePixels       int
	nearPixels       int // other pixels, all of them within 2 % of k_low
	otherPixels      int
	worstCentre      float64     // px
	worstSize        float64     // share
	exceptions       []exception // to the rule; each is printed
}

// exception is a thing for which the rule does not hold.
type exception struct{ kind, what string }

// The kinds of exceptions.
const (
	oneSide   = "object on one side only"
	faintSide = "thing below k_high on one side only"
	centreOff = "centres too far apart"
	sizeOff   = "sizes too far apart"
)

// allowed returns how many exceptions of a kind a surface may have. A cell's level and noise
// hang on which of its values are clipped: the reference's own noise moves by up to 3 % in a
// cell where the counts are rounded to 1/32 DN before, and the level of a cell with a large
// object in it by some hundredths of a sigma with the start of the clipping. That moves what
// is near k_low, and the outline at half height of a faint object on lay.
func allowed(kind string) int {
	if kind == faintSide || kind == sizeOff {
		return 1
	}
	return 0
}

// except notes an exception: where, and how each side has it.
func (t *tally) except(kind string, a thing, format string, args ...any) {
	t.exceptions = append(t.exceptions, exception{kind, fmt.Sprintf("%s: at (%.1f, %.1f), peak %.3f sigmas, %d px: %s", t.frame, a.X, a.Y, a.PeakSNR, a.AreaPx, kind) +
		fmt.Sprintf(format, args...)})
}

// add compares what was found in one frame.
func (t *tally) add(f found) {
	snr := f.item.Planes[pipeline.SNRPlane].Pixels
	ours, theirs := labels(f.fused, snr.Width, snr.Height), labels(f.reference, snr.Width, snr.Height)
	for i, a := range f.fused {
		b, ok := partner(a, i, theirs, ours, f.reference)
		t.fused += object01(a)
		t.compare("fused pass", a, b, ok, side{f.reference, theirs, ours, snr})
		if ok && a.PeakSNR >= kHigh && b.PeakSNR >= kHigh {
			t.pair(a, b, samePixels(a, b), near(ours, theirs, snr, a.spans, b.spans))
		}
	}
	for i, b := range f.reference {
		a, ok := partner(b, i, ours, theirs, f.fused)
		t.reference += object01(b)
		t.compare("reference", b, a, ok, side{f.fused, ours, theirs, snr})
	}
}

// object01 is 1 for an object, 0 for what is fainter.
func object01(a thing) int {
	if a.PeakSNR >= kHigh {
		return 1
	}
	return 0
}

// side is what the other side has found, with the labels of both.
type side struct {
	list       []thing
	other, own *labelled
	snr        *raster.Plane
}

// compare counts thing a of the side named. Where the other side does not have it, or has it
// below k_high, its peak must be near that threshold; or it is a piece of what the
// other side has whole, or the whole of pieces, for pixels near k_low.
func (t *tally) compare(name string, a, b thing, ok bool, s side) {
	high := a.PeakSNR >= kHigh
	if ok {
		t.low++
		if !high || b.PeakSNR >= kHigh {
			return
		}
	}
	k, kind := s.other.most(a.spans), faintSide
	if high {
		kind = oneSide
	}
	switch {
	case high && ok && a.PeakSNR <= kHigh*(1+nearThreshold) && b.PeakSNR >= kHigh*(1-nearThreshold):
		t.near++
	case !high && a.PeakSNR <= kLow*(1+nearThreshold):
		t.faint++
	case !ok && k >= 0 && (!high || s.list[k].PeakSNR >= kHigh) && near(s.own, s.other, s.snr, a.spans, s.list[k].spans):
		t.pieces++
	case k >= 0:
		t.except(kind, a, " (%s); the other has a peak of %.3f sigmas, %d px there", name, s.list[k].PeakSNR, s.list[k].AreaPx)
	default:
		t.except(kind, a, " (%s); the other has nothing there, the reference's snr is %.3f at most", name, most(s.snr, a.spans))
	}
}

// most is the highest value of a plane in spans.
func most(p *raster.Plane, spans []raster.Span) float32 {
	x, y := highest(p, spans)
	return p.At(x, y)
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
		t.except(centreOff, a, " by %.3f px", off)
	}
	sizes := ""
	for _, s := range []struct {
		name       string
		ours, want float64
	}{{"diameter", a.Diameter, b.Diameter}, {"length", a.Length, b.Length}, {"width", a.Width, b.Width}} {
		change := math.Abs(s.ours-s.want) / s.want
		t.worstSize = max(t.worstSize, change)
		if !(change <= sizeBound) {
			sizes += fmt.Sprintf("; %s %.3f px, reference %.3f px", s.name, s.ours, s.want)
		}
	}
	if sizes != "" {
		t.except(sizeOff, a, "%s", sizes)
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

// String is a line for people, and one for each exception.
func (t tally) String() string {
	out := fmt.Sprintf("fused pass and reference on %s: %d and %d objects, %d in both (%d with the same pixels, %d but for pixels within %g %% of k_low, %d otherwise), "+
		"%d on one side only within %g %% of k_high; of %d things above k_low, %d are on one side only within %g %% of it, %d in pieces for pixels within %g %% of it; "+
		"centres differ by at most %.3f px, sizes by %.2f %%; exceptions: %d",
		t.surface, t.fused, t.reference, t.pairs, t.samePixels, t.nearPixels, 100*nearThreshold, t.otherPixels, t.near, 100*nearThreshold,
		t.low+t.faint+t.pieces, t.faint, 100*nearThreshold, t.pieces, 100*nearThreshold, t.worstCentre, 100*t.worstSize, len(t.exceptions))
	for _, e := range t.exceptions {
		out += "\n  exception: " + e.what
	}
	return out
}

// check says what is beyond the bounds.
func (t tally) check() error {
	counts := map[string]int{}
	for _, e := range t.exceptions {
		counts[e.kind]++
	}
	for _, kind := range []string{oneSide, faintSide, centreOff, sizeOff} {
		if counts[kind] > allowed(kind) {
			return fmt.Errorf("%s: exceptions: %d × %s; want at most %d", t.surface, counts[kind], kind, allowed(kind))
		}
	}
	if float64(t.otherPixels) > (1-leastPixels)*float64(t.pairs) {
		return fmt.Errorf("%s: %d of %d objects have other pixels, and not only near k_low; want at most %.0f %%", t.surface, t.otherPixels, t.pairs, 100*(1-leastPixels))
	}
	if t.pairs < leastObjects {
		return fmt.Errorf("%s: %d objects in common, want at least %d to compare", t.surface, t.pairs, leastObjects)
	}
	return nil
}
