package inspectpb

import (
	"google.golang.org/grpc/encoding"
	grpcproto "google.golang.org/grpc/encoding/proto"
	"google.golang.org/grpc/mem"
	"google.golang.org/protobuf/proto"
)

// Codec is protobuf as gRPC speaks it, byte for byte, but does not copy the pixels of
// frames: those that go out are sent from where they lie, and those that come in stay in
// the buffers they came in until they are copied to where they belong. A server takes
// them in as an Incoming or an IncomingUnit; all other messages are left to gRPC's own
// codec. Either side may do without it.
//
// A client must not alter pixels that it has sent before it has the answer.
type Codec struct{}

var _ encoding.CodecV2 = Codec{}

// Name implements encoding.CodecV2: the content type is that of protobuf.
func (Codec) Name() string { return grpcproto.Name }

// plain is gRPC's own codec.
func plain() encoding.CodecV2 { return encoding.GetCodecV2(grpcproto.Name) }

// Marshal implements encoding.CodecV2.
func (Codec) Marshal(v any) (mem.BufferSlice, error) {
	switch m := v.(type) {
	case *InspectRequest:
		if out, ok := layChunk(m); ok {
			return out, nil
		}
	case *InspectUnitRequest:
		if out, ok := layUnit(m); ok {
			return out, nil
		}
	}
	return plain().Marshal(v)
}

// Unmarshal implements encoding.CodecV2.
func (Codec) Unmarshal(data mem.BufferSlice, v any) error {
	switch m := v.(type) {
	case *Incoming:
		return m.decode(data)
	case *IncomingUnit:
		return m.decode(data)
	}
	return plain().Unmarshal(data, v)
}

// decodeWhole decodes a message that is not laid out as expected, in one piece.
func decodeWhole(data mem.BufferSlice, m proto.Message) error { return plain().Unmarshal(data, m) }
