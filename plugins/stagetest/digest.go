package stagetest

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"hash"
	"maps"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Digest returns a hash over everything an Item holds, to the last bit; Items with
// equal digests are equal. Zones count by name, area and pixels, not by their function.
func Digest(item *pipeline.Item) string {
	h := sha256.New()
	digestItem(h, item)
	return hex.EncodeToString(h.Sum(nil))
}

func digestItem(h hash.Hash, item *pipeline.Item) {
	fmt.Fprintf(h, "%+v %s %+v %v\n", item.Identity, item.View, item.Coverage, item.Truncated)
	fmt.Fprintf(h, "%+v\n%+v\n%+v\n", item.Geometry, item.Measurements, item.Proofs)
	for _, f := range item.Frames {
		h.Write(f.Raw.Data)
	}
	for _, name := range slices.Sorted(maps.Keys(item.Planes)) {
		p := item.Planes[name]
		fmt.Fprintln(h, name, p.Unit, p.OriginX, p.OriginY, p.Step)
		digestPlane(h, p.Pixels)
	}
	digestMask(h, item.BadMask)
	digestMask(h, item.SaturatedAt)
	if r := item.Region; r != nil {
		fmt.Fprintln(h, r.CentreX, r.CentreY, r.RadiusPx)
		for _, z := range r.Zones {
			fmt.Fprintln(h, z.Name, z.AreaMM2, z.EquivalentDiameterMM, z.Spans)
		}
		digestMask(h, r.Mask())
	}
	if item.Grid != nil {
		fmt.Fprintf(h, "%+v\n", *item.Grid)
	}
	if item.CoverageMap != nil {
		fmt.Fprintf(h, "%+v\n", *item.CoverageMap)
	}
	digestDefects(h, item.Defects)
	for _, v := range item.Views {
		digestItem(h, v)
	}
}

// digestDefects writes defects as JSON; numbers that JSON cannot hold go in as text.
func digestDefects(h hash.Hash, defects []pipeline.Defect) {
	for _, d := range defects {
		if b, err := json.Marshal(d); err == nil {
			h.Write(b)
		} else {
			fmt.Fprintf(h, "%+v", d)
		}
	}
	fmt.Fprintln(h, len(defects))
}

func digestPlane(h hash.Hash, p *raster.Plane) {
	fmt.Fprintln(h, p.Width, p.Height)
	row := make([]byte, 4*p.Width)
	for y := range p.Height {
		for x, v := range p.Row(y) {
			binary.LittleEndian.PutUint32(row[4*x:], math.Float32bits(v))
		}
		h.Write(row)
	}
}

func digestMask(h hash.Hash, m *raster.Mask) {
	if m == nil {
		fmt.Fprintln(h, "none")
		return
	}
	fmt.Fprintln(h, m.Width, m.Height, m.Spans())
}
