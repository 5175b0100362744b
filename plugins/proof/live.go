package proof

import (
	"fmt"
	"strings"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// proveLive gives one proof over all frames of the view; its value is how many things
// were found that no living camera sends.
func (st *stage) proveLive(item *pipeline.Item, planes []*raster.Plane) {
	proof := pipeline.Proof{Name: pipeline.ProofLive}
	var reasons []string
	found := func(n int, format string, args ...any) {
		if n > 0 {
			proof.Value += float64(n)
			reasons = append(reasons, fmt.Sprintf(format, args...))
		}
	}
	for i, f := range item.Frames {
		d := findDead(planes[i], st.s.BlockPx, float32(f.Raw.Format.MaxCount()))
		found(d.rows, "%d rows from row %d on are of one value or the row above again: lines were not transferred", d.rows, d.firstRow)
		found(d.columns, "%d columns from column %d on are of one value", d.columns, d.firstColumn)
		found(d.blocks, "%d blocks of %d px, the first at (%d, %d), are of one value: they were not transferred", d.blocks, st.s.BlockPx, d.firstX, d.firstY)
		if text := st.memory.look(f, st.s.CounterStep); text != "" {
			found(1, "%s", text)
		}
	}
	proof.Reason = strings.Join(reasons, "; ")
	proof.OK = proof.Reason == ""
	item.Prove(proof)
}

func planeOf(item *pipeline.Item, i int) (*raster.Plane, error) {
	if i == 0 {
		return item.Raw()
	}
	return item.Frames[i].Raw.Plane()
}

// dead counts the parts of a frame that cannot be a picture.
type dead struct {
	rows, firstRow         int
	columns, firstColumn   int
	blocks, firstX, firstY int
}

// leastColumn is the shortest column whose values may not be all alike: shorter ones may be
// by chance.
const leastColumn = 16

func findDead(p *raster.Plane, block int, top float32) dead {
	var d dead
	d.findRows(p)
	if p.Height >= leastColumn {
		d.findColumns(p)
	}
	if block > 0 {
		d.findBlocks(p, block, top)
	}
	return d
}

func (d *dead) findRows(p *raster.Plane) {
	for y, dead := range raster.DeadRows(p) {
		if dead && d.rows == 0 {
			d.firstRow = y
		}
		if dead {
			d.rows++
		}
	}
}

// findColumns keeps the columns that are still of one value from row to row: after a few
// rows hardly any is.
func (d *dead) findColumns(p *raster.Plane) {
	left := make([]int, p.Width)
	for x := range left {
		left[x] = x
	}
	first := p.Row(0)
	for y := 1; y < p.Height && len(left) > 0; y++ {
		row, kept := p.Row(y), left[:0]
		for _, x := range left {
			if row[x] == first[x] {
				kept = append(kept, x)
			}
		}
		left = kept
	}
	if d.columns = len(left); d.columns > 0 {
		d.firstColumn = left[0]
	}
}

func (d *dead) findBlocks(p *raster.Plane, side int, top float32) {
	for y := 0; y+side <= p.Height; y += side {
		for x := 0; x+side <= p.Width; x += side {
			if raster.DeadBlock(p, x, y, side, top) {
				if d.blocks == 0 {
					d.firstX, d.firstY = x, y
				}
				d.blocks++
			}
		}
	}
}
