package stagepb

import (
	"fmt"
	"maps"
	"slices"
	"unsafe"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Pack puts pixels where the other side finds them: shared memory, or the message.
type Pack func(data []byte) (*Pixels, error)

// Fetch returns pixels that the other side packed. They may be shared: they are read
// only, and not to be kept beyond the call.
type Fetch func(p *Pixels) ([]byte, error)

// InMessage packs pixels as bytes of the message.
func InMessage(data []byte) (*Pixels, error) {
	return &Pixels{Where: &Pixels_Data{Data: data}}, nil
}

// FromMessage fetches pixels that InMessage packed.
func FromMessage(p *Pixels) ([]byte, error) {
	if d, ok := p.GetWhere().(*Pixels_Data); ok {
		return d.Data, nil
	}
	return nil, fmt.Errorf("pixels: got none in the message")
}

// FromPlane encodes a plane; rows are sent without gaps.
func FromPlane(name string, p pipeline.NamedPlane, pack Pack) (*Plane, error) {
	pix := p.Pixels
	if pix.Stride != pix.Width {
		pix = pix.Clone()
	}
	pixels, err := pack(bytesOf(pix.Pix[:pix.Width*pix.Height]))
	return &Plane{Name: name, Unit: p.Unit, Width: int32(pix.Width), Height: int32(pix.Height), Stride: int32(pix.Width),
		OriginX: p.OriginX, OriginY: p.OriginY, Step: p.Step, Pixels: pixels}, err
}

// ToPlane decodes a plane and checks that its pixels have the size it says. The values
// lie where fetch found them.
func ToPlane(p *Plane, fetch Fetch) (pipeline.NamedPlane, error) {
	width, height, stride := int(p.GetWidth()), int(p.GetHeight()), int(p.GetStride())
	if err := checkSides(width, height); err != nil {
		return pipeline.NamedPlane{}, fmt.Errorf("plane %q: %w", p.GetName(), err)
	}
	if stride < width || stride > 8*raster.MaxSide {
		return pipeline.NamedPlane{}, fmt.Errorf("plane %q: stride: got %d px, want %d to %d", p.GetName(), stride, width, 8*raster.MaxSide)
	}
	data, err := fetch(p.GetPixels())
	if err != nil {
		return pipeline.NamedPlane{}, fmt.Errorf("plane %q: %w", p.GetName(), err)
	}
	if len(data) != 4*stride*height {
		return pipeline.NamedPlane{}, fmt.Errorf("plane %q: got %d bytes, want %d (4 × stride %d × height %d)", p.GetName(), len(data), 4*stride*height, stride, height)
	}
	step := p.GetStep()
	if step == 0 {
		step = 1
	}
	return pipeline.NamedPlane{Unit: p.GetUnit(), OriginX: p.GetOriginX(), OriginY: p.GetOriginY(), Step: step,
		Pixels: &raster.Plane{Pix: floatsOf(data), Width: width, Height: height, Stride: stride}}, nil
}

// FromPlanes encodes those planes that are wanted, in the order of their names.
func FromPlanes(planes map[string]pipeline.NamedPlane, wanted func(name string) bool, pack Pack) ([]*Plane, error) {
	var out []*Plane
	for _, name := range slices.Sorted(maps.Keys(planes)) {
		if !wanted(name) {
			continue
		}
		p, err := FromPlane(name, planes[name], pack)
		if err != nil {
			return nil, err
		}
		out = append(out, p)
	}
	return out, nil
}

// bytesOf returns the memory of values; the machines that are built for are little-endian.
func bytesOf(v []float32) []byte {
	return unsafe.Slice((*byte)(unsafe.Pointer(unsafe.SliceData(v))), 4*len(v))
}

// floatsOf is the inverse of bytesOf; it copies where the bytes are not aligned.
func floatsOf(b []byte) []float32 {
	p := unsafe.Pointer(unsafe.SliceData(b))
	if uintptr(p)%4 != 0 {
		out := make([]float32, len(b)/4)
		copy(bytesOf(out), b)
		return out
	}
	return unsafe.Slice((*float32)(p), len(b)/4)
}
