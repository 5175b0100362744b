package inspectpb

import (
	"google.golang.org/grpc/mem"
	"google.golang.org/protobuf/encoding/protowire"
	"google.golang.org/protobuf/proto"
)

// dataField is the number of the pixels in FrameChunk and Frame: the highest, so that
// they come last.
const dataField = 15

// Incoming is an InspectRequest as it comes in. To be received by RecvMsg of a stream
// whose server uses Codec.
type Incoming struct {
	Request *InspectRequest // of a chunk all but the data, which Pieces has
	pieces  [][]byte
	held    mem.BufferSlice // what pieces point into; nil = memory of their own
}

// Pieces returns the data of a chunk, in order. They are valid until Free.
func (m *Incoming) Pieces() [][]byte { return m.pieces }

// Free gives the memory of the data back to gRPC.
func (m *Incoming) Free() {
	m.held.Free()
	m.held, m.pieces = nil, nil
}

func (m *Incoming) decode(data mem.BufferSlice) error {
	m.Free()
	c := &cursor{data: data, left: data.Len()}
	if chunk, ok := c.chunk(); ok {
		data.Ref()
		m.held, m.pieces = data, c.take(c.left)
		m.Request = &InspectRequest{Message: &InspectRequest_Chunk{Chunk: chunk}}
		return nil
	}
	m.Request = &InspectRequest{}
	if err := decodeWhole(data, m.Request); err != nil {
		return err
	}
	if chunk := m.Request.GetChunk(); chunk != nil {
		m.pieces, chunk.Data = [][]byte{chunk.Data}, nil
	}
	return nil
}

// chunk reads up to the data of a chunk that is laid out as protobuf libraries do: its
// numbers, then the data up to the end. It returns false for anything else.
func (c *cursor) chunk() (*FrameChunk, bool) {
	if !c.whole(2) {
		return nil, false
	}
	out := &FrameChunk{}
	for {
		number, typ, ok := c.tag()
		switch {
		case !ok:
			return nil, false
		case number == dataField && typ == protowire.BytesType:
			n, ok := c.varint()
			return out, ok && n == uint64(c.left)
		case typ != protowire.VarintType || number != 1 && number != 2:
			return nil, false
		}
		v, ok := c.varint()
		if !ok {
			return nil, false
		}
		if number == 1 {
			out.Frame = uint32(v) // higher bits are dropped, as protobuf wants it
		} else {
			out.Offset = v
		}
	}
}

// IncomingFrame is a frame of an IncomingUnit.
type IncomingFrame struct {
	Header *FrameHeader
	Pieces [][]byte // the data, in order; valid until the unit's Free
}

// IncomingUnit is an InspectUnitRequest as it comes in.
type IncomingUnit struct {
	Frames []IncomingFrame
	held   mem.BufferSlice
}

// Free gives the memory of the data back to gRPC.
func (m *IncomingUnit) Free() {
	m.held.Free()
	m.held, m.Frames = nil, nil
}

func (m *IncomingUnit) decode(data mem.BufferSlice) error {
	m.Free()
	c := &cursor{data: data, left: data.Len()}
	if frames, ok := c.frames(); ok {
		data.Ref()
		m.held, m.Frames = data, frames
		return nil
	}
	whole := &InspectUnitRequest{}
	if err := decodeWhole(data, whole); err != nil {
		return err
	}
	for _, f := range whole.Frames {
		m.Frames = append(m.Frames, IncomingFrame{f.GetHeader(), [][]byte{f.GetData()}})
	}
	return nil
}

// frames reads frames that are each a header and then the data; false for anything else.
func (c *cursor) frames() ([]IncomingFrame, bool) {
	var out []IncomingFrame
	for c.left > 0 {
		number, typ, tagged := c.tag()
		n, ok := c.varint()
		if !tagged || !ok || number != 1 || typ != protowire.BytesType || n > uint64(c.left) {
			return nil, false
		}
		f, ok := c.frame(c.left - int(n))
		if !ok {
			return nil, false
		}
		out = append(out, f)
	}
	return out, true
}

// frame reads a frame up to where rest bytes are left.
func (c *cursor) frame(rest int) (IncomingFrame, bool) {
	f := IncomingFrame{}
	number, typ, tagged := c.tag()
	n, ok := c.varint()
	if !tagged || !ok || number != 1 || typ != protowire.BytesType || n > uint64(max(c.left-rest, 0)) {
		return f, false
	}
	f.Header = &FrameHeader{}
	if proto.Unmarshal(c.bytes(int(n)), f.Header) != nil {
		return f, false
	}
	number, typ, tagged = c.tag()
	n, ok = c.varint()
	if !tagged || !ok || number != dataField || typ != protowire.BytesType || c.left < rest || n != uint64(c.left-rest) {
		return f, false
	}
	f.Pieces = c.take(int(n))
	return f, true
}
