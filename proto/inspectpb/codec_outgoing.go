package inspectpb

import (
	"google.golang.org/grpc/mem"
	"google.golang.org/protobuf/encoding/protowire"
	"google.golang.org/protobuf/proto"
)

// leastApart is from how many bytes on data are sent from where they lie.
const leastApart = 4096

// layChunk encodes a chunk with its data where they lie. It returns false for what had
// better be encoded in one piece.
func layChunk(m *InspectRequest) (mem.BufferSlice, bool) {
	chunk := m.GetChunk()
	if len(chunk.GetData()) < leastApart || len(m.ProtoReflect().GetUnknown())+len(chunk.ProtoReflect().GetUnknown()) > 0 {
		return nil, false
	}
	var inner []byte
	if chunk.Frame != 0 {
		inner = protowire.AppendVarint(protowire.AppendTag(inner, 1, protowire.VarintType), uint64(chunk.Frame))
	}
	if chunk.Offset != 0 {
		inner = protowire.AppendVarint(protowire.AppendTag(inner, 2, protowire.VarintType), chunk.Offset)
	}
	inner = appendHead(inner, dataField, len(chunk.Data))
	head := append(appendHead(nil, 2, len(inner)+len(chunk.Data)), inner...)
	return mem.BufferSlice{mem.SliceBuffer(head), mem.SliceBuffer(chunk.Data)}, true
}

// layUnit encodes a unit with the data of its frames where they lie.
func layUnit(m *InspectUnitRequest) (mem.BufferSlice, bool) {
	var out mem.BufferSlice
	for _, f := range m.Frames {
		if len(f.GetData()) < leastApart || f.Header == nil || len(f.ProtoReflect().GetUnknown()) > 0 {
			return nil, false
		}
		header, err := proto.Marshal(f.Header)
		if err != nil {
			return nil, false // the plain way says what is wrong
		}
		inner := append(appendHead(nil, 1, len(header)), header...)
		inner = appendHead(inner, dataField, len(f.Data))
		head := append(appendHead(nil, 1, len(inner)+len(f.Data)), inner...)
		out = append(out, mem.SliceBuffer(head), mem.SliceBuffer(f.Data))
	}
	return out, len(out) > 0 && len(m.ProtoReflect().GetUnknown()) == 0
}

// appendHead appends tag and length of a field of n bytes.
func appendHead(b []byte, number protowire.Number, n int) []byte {
	return protowire.AppendVarint(protowire.AppendTag(b, number, protowire.BytesType), uint64(n))
}
