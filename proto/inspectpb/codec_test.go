package inspectpb_test

import (
	"bytes"
	"slices"
	"strings"
	"testing"

	"google.golang.org/grpc/mem"
	"google.golang.org/protobuf/encoding/protowire"
	"google.golang.org/protobuf/proto"

	"lapgate/proto/inspectpb"
)

// pool lends buffers and counts those that are out.
type pool struct{ out int }

func (p *pool) Get(n int) *[]byte {
	p.out++
	b := make([]byte, n, n+2048) // gRPC keeps small buffers out of pools
	return &b
}

// Put spoils what it takes back, so that one who still reads it is found out.
func (p *pool) Put(b *[]byte) {
	p.out--
	all := (*b)[:cap(*b)]
	for i := range all {
		all[i] = 0xa5
	}
}

// cut lays a message into buffers as gRPC does, cut at the places given; some are empty.
func cut(message []byte, cuts []byte, p *pool) mem.BufferSlice {
	var out mem.BufferSlice
	add := func(b []byte) {
		lent := p.Get(len(b))
		copy(*lent, b)
		out = append(out, mem.NewBuffer(lent, p))
	}
	for _, c := range cuts {
		n := min(int(c), len(message))
		add(message[:n])
		message = message[n:]
	}
	add(message)
	return out
}

// big is data that are sent from where they lie.
func big(n int) []byte {
	out := make([]byte, n)
	for i := range out {
		out[i] = byte(i*31 + i>>8)
	}
	return out
}

func chunkRequest(frame uint32, offset uint64, data []byte) *inspectpb.InspectRequest {
	return &inspectpb.InspectRequest{Message: &inspectpb.InspectRequest_Chunk{Chunk: &inspectpb.FrameChunk{Frame: frame, Offset: offset, Data: data}}}
}

func unitRequest() *inspectpb.InspectUnitRequest {
	h := &inspectpb.FrameHeader{Identity: &inspectpb.Identity{Part: "disc", Unit: "u1"}, View: "ring", Width: 100, Height: 50, Tags: map[string]string{"tool": "3"}}
	return &inspectpb.InspectUnitRequest{Frames: []*inspectpb.Frame{{Header: h, Data: big(5000)}, {Header: h, Data: big(70000)}}}
}

func encode(t testing.TB, m proto.Message) []byte {
	t.Helper()
	b, err := proto.MarshalOptions{Deterministic: true}.Marshal(m)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// field encodes one field of bytes.
func field(number protowire.Number, data []byte) []byte {
	return protowire.AppendBytes(protowire.AppendTag(nil, number, protowire.BytesType), data)
}

func number(n protowire.Number, v uint64) []byte {
	return protowire.AppendVarint(protowire.AppendTag(nil, n, protowire.VarintType), v)
}

// odd lists messages of chunks that are not laid out in the usual way, and broken ones.
func odd(t testing.TB) map[string][]byte {
	data := field(15, []byte("pixels"))
	inner := slices.Concat(number(1, 7), number(2, 100), data)
	plain := encode(t, chunkRequest(7, 100, []byte("pixels")))
	return map[string][]byte{
		"plain":                plain,
		"empty":                nil,
		"empty chunk":          field(2, nil),
		"no numbers":           field(2, data),
		"numbers twice":        field(2, slices.Concat(number(1, 1), number(2, 5), number(1, 7), number(2, 100), data)),
		"numbers swapped":      field(2, slices.Concat(number(2, 100), number(1, 7), data)),
		"frame above 32 bits":  field(2, slices.Concat(number(1, 1<<40|7), data)),
		"data first":           field(2, slices.Concat(data, number(1, 7), number(2, 100))),
		"data twice":           field(2, slices.Concat(inner, field(15, []byte("others")))),
		"no data":              field(2, slices.Concat(number(1, 7), number(2, 100))),
		"empty data":           field(2, slices.Concat(number(1, 7), field(15, nil))),
		"unknown before":       field(2, slices.Concat(number(9, 5), inner)),
		"unknown after":        field(2, slices.Concat(inner, field(16, []byte("more")))),
		"unknown outside":      slices.Concat(plain, field(3, []byte("more"))),
		"two chunks":           slices.Concat(plain, field(2, number(1, 8))),
		"chunk, then start":    slices.Concat(plain, field(1, number(1, 8))),
		"start, then chunk":    slices.Concat(field(1, number(1, 8)), plain),
		"data as number":       field(2, slices.Concat(number(1, 7), number(15, 6))),
		"frame as bytes":       field(2, slices.Concat(field(1, []byte{7}), data)),
		"chunk as number":      number(2, 7),
		"group":                {0x13, 0x14},
		"group without end":    {0x13, 0x08},
		"long tag":             slices.Concat([]byte{0x92, 0x00, byte(len(inner))}, inner),
		"long length":          slices.Concat([]byte{0x12, byte(len(inner)) | 0x80, 0x80, 0x00}, inner),
		"length over the end":  slices.Concat([]byte{0x12, byte(len(inner) + 1)}, inner),
		"length below the end": slices.Concat([]byte{0x12, byte(len(inner) - 1)}, inner),
		"inner length over":    slices.Concat([]byte{0x12, byte(len(inner))}, inner[:len(inner)-7], []byte{7}, []byte("pixels")),
		"inner length huge":    field(2, slices.Concat([]byte{0x7a, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0x01}, []byte("pixels"))),
		"length of 2^64":       {0x12, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0x02},
		"varint without end":   {0x12, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff},
		"field 0":              {0x02, 0x00},
		"cut short":            plain[:len(plain)-3],
	}
}

// sameAsGenerated holds Incoming against what the generated code makes of the message in
// one piece: the same is taken, with the same result.
func sameAsGenerated(t *testing.T, message, cuts []byte) {
	t.Helper()
	want := &inspectpb.InspectRequest{}
	wantErr := proto.Unmarshal(message, want)
	p := &pool{}
	data := cut(message, cuts, p)
	got := &inspectpb.Incoming{}
	err := inspectpb.Codec{}.Unmarshal(data, got)
	data.Free() // as gRPC does
	if (err == nil) != (wantErr == nil) {
		t.Fatalf("%x: error %v, the generated code says %v", message, err, wantErr)
	}
	if err == nil {
		if c := got.Request.GetChunk(); c != nil {
			if len(c.Data) > 0 {
				t.Error("data in two places")
			}
			c.Data = bytes.Join(got.Pieces(), nil)
		}
		if !proto.Equal(got.Request, want) {
			t.Fatalf("%x: got %v, the generated code says %v", message, got.Request, want)
		}
	}
	got.Free()
	got.Free() // twice is once
	if p.out != 0 {
		t.Errorf("%d buffers are still out", p.out)
	}
}

func sameUnit(t *testing.T, message, cuts []byte) {
	t.Helper()
	want := &inspectpb.InspectUnitRequest{}
	wantErr := proto.Unmarshal(message, want)
	p := &pool{}
	data := cut(message, cuts, p)
	got := &inspectpb.IncomingUnit{}
	err := inspectpb.Codec{}.Unmarshal(data, got)
	data.Free()
	if (err == nil) != (wantErr == nil) {
		t.Fatalf("%x: error %v, the generated code says %v", message, err, wantErr)
	}
	if err == nil && len(got.Frames) != len(want.Frames) {
		t.Fatalf("%x: %d frames, the generated code finds %d", message, len(got.Frames), len(want.Frames))
	}
	for i, f := range got.Frames {
		w := want.Frames[i]
		if !bytes.Equal(bytes.Join(f.Pieces, nil), w.Data) || !proto.Equal(f.Header, w.Header) || (f.Header == nil) != (w.Header == nil) {
			t.Fatalf("%x: frame %d is not what the generated code reads", message, i)
		}
	}
	got.Free()
	if p.out != 0 {
		t.Errorf("%d buffers are still out", p.out)
	}
}

func TestIncomingSameAsGenerated(t *testing.T) {
	for name, message := range odd(t) {
		t.Run(name, func(t *testing.T) {
			for _, cuts := range [][]byte{nil, {0, 1}, {1, 1, 1, 0, 1, 1, 1}, {2, 3}, {5, 0, 0, 2}} {
				sameAsGenerated(t, message, cuts)
				sameUnit(t, message, cuts)
			}
		})
	}
	start := &inspectpb.InspectRequest{Message: &inspectpb.InspectRequest_Start{Start: &inspectpb.FrameStart{Frame: 3, Header: &inspectpb.FrameHeader{View: "ring"}}}}
	for _, m := range []*inspectpb.InspectRequest{start, chunkRequest(1, 0, big(100_000)), chunkRequest(0, 1<<63, big(17))} {
		sameAsGenerated(t, encode(t, m), []byte{9, 200, 0, 200})
	}
	sameUnit(t, encode(t, unitRequest()), []byte{1, 3, 100, 0, 255})
}

// The data stay in gRPC's own buffers: nothing is copied on the way in.
func TestDataStayWhereTheyCame(t *testing.T) {
	message := encode(t, chunkRequest(3, 9, big(50_000)))
	data := mem.BufferSlice{mem.SliceBuffer(message[:20_000]), mem.SliceBuffer(message[20_000:])}
	in := &inspectpb.Incoming{}
	if err := (inspectpb.Codec{}).Unmarshal(data, in); err != nil {
		t.Fatal(err)
	}
	pieces := in.Pieces()
	if len(pieces) != 2 || &pieces[1][0] != &message[20_000] || &pieces[0][0] != &message[len(message)-50_000] {
		t.Errorf("%d pieces, not in the message's memory", len(pieces))
	}
	unit := &inspectpb.IncomingUnit{}
	message = encode(t, unitRequest())
	if err := (inspectpb.Codec{}).Unmarshal(mem.BufferSlice{mem.SliceBuffer(message)}, unit); err != nil {
		t.Fatal(err)
	}
	if p := unit.Frames[1].Pieces; len(p) != 1 || &p[0][0] != &message[len(message)-70_000] {
		t.Error("the unit's data were copied")
	}
}

// What goes out is what protobuf writes, with the pixels sent from where they lie.
func TestMarshalSameAsGenerated(t *testing.T) {
	withUnknown := chunkRequest(1, 2, big(5000))
	withUnknown.ProtoReflect().SetUnknown(field(9, []byte("more")))
	for _, m := range []proto.Message{chunkRequest(3, 1_000_000, big(300_000)), chunkRequest(0, 0, big(5000)), chunkRequest(1, 2, []byte("few")), chunkRequest(1, 2, nil),
		&inspectpb.InspectRequest{}, withUnknown, unitRequest(), &inspectpb.InspectUnitRequest{}, &inspectpb.InspectUnitRequest{Frames: []*inspectpb.Frame{nil, {}}}} {
		out, err := inspectpb.Codec{}.Marshal(m)
		if err != nil {
			t.Fatal(err)
		}
		back := m.ProtoReflect().New().Interface()
		if err := proto.Unmarshal(out.Materialize(), back); err != nil || !proto.Equal(back, m) || out.Len() != proto.Size(m) {
			t.Errorf("%T of %d bytes: %v, want the message itself in %d", m, out.Len(), err, proto.Size(m))
		}
	}
	data := big(5000)
	out, err := inspectpb.Codec{}.Marshal(chunkRequest(1, 2, data))
	if err != nil || len(out) != 2 || &out[1].ReadOnlyData()[0] != &data[0] {
		t.Errorf("%v: the data were copied", err)
	}
	bad := unitRequest()
	bad.Frames[0].Header.View = "\xff"
	if _, err := (inspectpb.Codec{}).Marshal(bad); err == nil || !strings.Contains(err.Error(), "UTF-8") {
		t.Errorf("a view that is no UTF-8: %v", err)
	}
}

// FuzzIncoming changes one bit of each message as well: that finds the borders of lengths.
func FuzzIncoming(f *testing.F) {
	for _, message := range odd(f) {
		f.Add(message, []byte{1, 0, 2}, uint16(9))
	}
	f.Add(encode(f, chunkRequest(1, 2, big(300))), []byte{7, 250}, uint16(20))
	whole := unitRequest()
	for _, frame := range whole.Frames {
		frame.Data = frame.Data[:60]
	}
	f.Add(encode(f, whole), []byte{3}, uint16(1))
	f.Fuzz(func(t *testing.T, message, cuts []byte, bit uint16) {
		sameAsGenerated(t, message, cuts)
		sameUnit(t, message, cuts)
		if at := int(bit / 8); at < len(message) {
			message = slices.Clone(message)
			message[at] ^= 1 << (bit % 8)
			sameAsGenerated(t, message, cuts)
			sameUnit(t, message, cuts)
		}
	})
}
