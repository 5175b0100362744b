package intake

import "lapgate/pipeline"

// Receiver puts the chunks of one frame together in its final buffer. It is not safe
// for concurrent use: a stream feeds it.
type Receiver struct {
	header pipeline.FrameHeader
	buffer []byte
	filled int
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
	n := h.PixelBytes()
	if err := in.admission.take(int64(n)); err != nil {
		return nil, err
	}
	return &Receiver{header: h, buffer: make([]byte, n), intake: in}, nil
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

// Add appends a chunk. Chunks come in order: a gap, an overlap or an overflow is an
// Invalid error, after which the frame must be refused.
func (r *Receiver) Add(offset uint64, data []byte) error {
	switch {
	case r.done:
		return pipeline.Invalid("chunk: the frame was already complete; got %d bytes more", len(data))
	case len(data) == 0:
		return pipeline.Invalid("chunk: got no data at offset %d", offset)
	case offset != uint64(r.filled):
		return pipeline.Invalid("offset: got %d, want %d (chunks of a frame come in order, without gap or overlap)", offset, r.filled)
	case len(data) > len(r.buffer)-r.filled:
		return pipeline.Invalid("chunk: got %d bytes at offset %d, want at most %d (frame of %d bytes)", len(data), offset, len(r.buffer)-r.filled, len(r.buffer))
	}
	r.filled += copy(r.buffer[r.filled:], data)
	r.done = r.filled == len(r.buffer)
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
		return pipeline.Invalid("data: got %d bytes, want %d; the frame was cut short", r.filled, len(r.buffer))
	}
	h := r.header
	checked := h
	if checked.Unit == "" {
		checked.Unit = "to-be-given"
	}
	checked.Attempt = max(checked.Attempt, 1)
	frame, err := pipeline.NewFrame(checked, r.buffer)
	if err != nil {
		return err
	}
	frame.Header.Unit, frame.Header.Attempt = h.Unit, h.Attempt
	r.buffer = nil
	return r.intake.add(frame, client, answer)
}

// Abandon gives back the memory of a frame that will not be submitted.
func (r *Receiver) Abandon() {
	if r.buffer != nil {
		r.intake.admission.give(int64(len(r.buffer)))
		r.buffer = nil
	}
}
