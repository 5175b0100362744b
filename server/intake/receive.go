package intake

import "lapgate/pipeline"

// Receiver puts the chunks of one frame together in its final buffer. It is not safe
// for concurrent use: a stream feeds it.
type Receiver struct {
	header pipeline.FrameHeader
	buffer *buffer // nil once it is another's
	filled int
	sum    uint32 // checksum of what is filled
	intake *Intake
	done   bool
}

// Begin admits a frame and returns its receiver. The error's kind is Invalid for a
// header that cannot be true, Exhausted when there is no room, Unready when the
// server is stopping.
func (in *Intake) Begin(h pipeline.FrameHeader) (*Receiver, error) {
	if err := checkHeader(h); err != nil {
		return nil, err
	}
	if in.stopping.Load() && !in.pending(h) {
		return nil, stopping("the server is stopping; resend the unit to the next one")
	}
	b, err := in.memory.lend(h.PixelBytes())
	if err != nil {
		return nil, err
	}
	return &Receiver{header: h, buffer: b, intake: in}, nil
}

// checkHeader is FrameHeader.Check for a header whose unit or attempt the server may
// still have to give.
func checkHeader(h pipeline.FrameHeader) error {
	if h.Unit == "" {
		if h.RequestID == "" {
			return pipeline.Invalid("request_id: not given, want one where the unit has no serial, the same on every frame of the showing")
		}
		h.Unit = "to-be-given"
	}
	if h.RequestID != "" {
		if err := pipeline.CheckID("request_id", h.RequestID); err != nil {
			return err
		}
	}
	if h.Attempt == 0 {
		h.Attempt = 1
	}
	return h.Check()
}

// Add copies a chunk, which may lie in several pieces, to its place in the frame. Chunks
// come in order: a gap, an overlap or an overflow is an Invalid error, after which the
// frame must be refused.
func (r *Receiver) Add(offset uint64, pieces ...[]byte) error {
	n := 0
	for _, p := range pieces {
		n += len(p)
	}
	if err := r.fits(offset, n); err != nil {
		return err
	}
	for _, p := range pieces {
		place := r.buffer.bytes[r.filled : r.filled+len(p)]
		copy(place, p)
		r.sum = pipeline.AddChecksum(r.sum, place) // while it is near: the frame is not read once more for it
		r.filled += len(p)
	}
	r.done = r.filled == len(r.buffer.bytes)
	return nil
}

func (r *Receiver) fits(offset uint64, n int) error {
	switch {
	case r.done || r.buffer == nil:
		return pipeline.Invalid("chunk: the frame was already complete; got %d bytes more", n)
	case n == 0:
		return pipeline.Invalid("chunk: got no data at offset %d", offset)
	case offset != uint64(r.filled):
		return pipeline.Invalid("offset: got %d, want %d (chunks of a frame come in order, without gap or overlap)", offset, r.filled)
	case n > len(r.buffer.bytes)-r.filled:
		return pipeline.Invalid("chunk: got %d bytes at offset %d, want at most %d (frame of %d bytes)", n, offset, len(r.buffer.bytes)-r.filled, len(r.buffer.bytes))
	}
	return nil
}

// Complete reports whether all bytes have come.
func (r *Receiver) Complete() bool { return r.done }

// Header returns the header that began the frame.
func (r *Receiver) Header() pipeline.FrameHeader { return r.header }

// Submit checks the frame and gives it to its showing. When the showing has a verdict
// or was dropped, the answer of each of its clients is called once, from another
// goroutine. After an error the frame is not in the showing.
func (r *Receiver) Submit(client any, answer Answer) error {
	if !r.done {
		return pipeline.Invalid("data: got %d bytes, want %d; the frame was cut short", r.filled, r.header.PixelBytes())
	}
	h := r.header
	checked := h
	if checked.Unit == "" {
		checked.Unit = "to-be-given"
	}
	checked.Attempt = max(checked.Attempt, 1)
	frame, err := pipeline.NewSummedFrame(checked, r.buffer.bytes, r.sum)
	if err != nil {
		return err
	}
	frame.Header.Unit, frame.Header.Attempt = h.Unit, h.Attempt
	b := r.buffer
	r.buffer = nil
	return r.intake.add(frame, b, client, answer)
}

// Abandon gives back the memory of a frame that will not be submitted.
func (r *Receiver) Abandon() {
	if r.buffer != nil {
		r.buffer.giveBack()
		r.buffer = nil
	}
}
