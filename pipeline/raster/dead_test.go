package raster

import "testing"

func TestDeadRowsAndBlocks(t *testing.T) {
	p := NewPlane(32, 20)
	for i := range p.Pix {
		p.Pix[i] = float32(i*7919%251 + i%13)
	}
	for _, dead := range DeadRows(p) {
		if dead {
			t.Fatal("a living row is called dead")
		}
	}
	for x := range 32 {
		p.Set(x, 4, 9)
	}
	copy(p.Row(11), p.Row(10))
	for y, dead := range DeadRows(p) {
		if dead != (y == 4 || y == 11) {
			t.Errorf("row %d: %v", y, dead)
		}
	}
	for y := 12; y < 16; y++ {
		for x := 8; x < 12; x++ {
			p.Set(x, y, 77)
		}
	}
	if !DeadBlock(p, 8, 12, 4, 255) || DeadBlock(p, 9, 12, 4, 255) || DeadBlock(p, 8, 12, 4, 77) {
		t.Error("blocks")
	}
	narrow := NewPlane(8, 8)
	if DeadRows(narrow)[3] {
		t.Error("a short row may be of one value by chance")
	}
}
