package inspectpb

import (
	"google.golang.org/grpc/mem"
	"google.golang.org/protobuf/encoding/protowire"
)

// longestVarint is how many bytes a tag or a number may take.
const longestVarint = 10

// cursor reads a message that lies in several buffers from front to back.
type cursor struct {
	data mem.BufferSlice
	at   int // bytes of data[0] that are read
	left int // bytes of all
}

// whole reports whether the rest is one field of bytes with this number, and enters it.
func (c *cursor) whole(number protowire.Number) bool {
	got, typ, ok := c.tag()
	if !ok || got != number || typ != protowire.BytesType {
		return false
	}
	n, ok := c.varint()
	return ok && n == uint64(c.left)
}

// varint reads a number; false where there is none.
func (c *cursor) varint() (uint64, bool) {
	var near [longestVarint]byte
	v, n := protowire.ConsumeVarint(near[:c.peek(near[:])])
	if n < 0 {
		return 0, false
	}
	c.skip(n)
	return v, true
}

// tag reads a field's number and type; false where there is none.
func (c *cursor) tag() (protowire.Number, protowire.Type, bool) {
	var near [longestVarint]byte
	number, typ, n := protowire.ConsumeTag(near[:c.peek(near[:])])
	if n < 0 {
		return 0, 0, false
	}
	c.skip(n)
	return number, typ, true
}

// peek copies what comes next and returns how many bytes there were.
func (c *cursor) peek(dst []byte) int {
	n, at := 0, c.at
	for _, b := range c.data {
		n += copy(dst[n:], b.ReadOnlyData()[at:])
		if at = 0; n == len(dst) {
			break
		}
	}
	return n
}

// skip passes over n bytes that are there.
func (c *cursor) skip(n int) {
	c.left -= n
	for n > 0 {
		step := min(n, c.data[0].Len()-c.at)
		n, c.at = n-step, c.at+step
		if c.at == c.data[0].Len() {
			c.data, c.at = c.data[1:], 0
		}
	}
}

// bytes returns a copy of the next n bytes.
func (c *cursor) bytes(n int) []byte {
	out := make([]byte, n)
	c.peek(out)
	c.skip(n)
	return out
}

// take returns the next n bytes where they lie.
func (c *cursor) take(n int) [][]byte {
	out := make([][]byte, 0, len(c.data))
	for n > 0 {
		piece := c.data[0].ReadOnlyData()[c.at:]
		piece = piece[:min(n, len(piece))]
		if len(piece) > 0 {
			out = append(out, piece)
		}
		n -= len(piece)
		c.left -= len(piece)
		if c.at += len(piece); c.at == c.data[0].Len() {
			c.data, c.at = c.data[1:], 0
		}
	}
	return out
}
