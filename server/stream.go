package server

import (
	"errors"
	"io"
	"strconv"
	"sync"

	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/intake"
)

// maxOpenFrames is how many frames may interleave on one stream.
const maxOpenFrames = 64

// Inspect implements InspectionService. The stream ends without an error when the
// client has sent all and every showing is answered.
func (s *Inspection) Inspect(grpcStream grpc.BidiStreamingServer[inspectpb.InspectRequest, inspectpb.InspectResponse]) error {
	st := &stream{grpc: grpcStream, intake: s.deps.Intake, frames: map[uint32]*intake.Receiver{}, refused: map[uint32]bool{}, waiting: map[string]bool{}}
	st.idle = sync.NewCond(&st.mu)
	defer st.abandon()
	for {
		var in inspectpb.Incoming // as Recv, but the pixels stay where they came until they have a place
		err := grpcStream.RecvMsg(&in)
		if errors.Is(err, io.EOF) {
			return st.wait()
		}
		if err != nil {
			return err
		}
		err = st.take(&in)
		in.Free()
		if err != nil {
			return err
		}
	}
}

// stream is one line's conversation. frames and refused belong to the receiving
// goroutine; the rest is shared with the goroutines that answer.
type stream struct {
	grpc    grpc.BidiStreamingServer[inspectpb.InspectRequest, inspectpb.InspectResponse]
	intake  *intake.Intake
	frames  map[uint32]*intake.Receiver
	refused map[uint32]bool // frames whose remaining chunks are to be ignored

	mu      sync.Mutex // guards sending and everything below
	idle    *sync.Cond
	waiting map[string]bool // showings that this stream will be answered for
	failed  error           // a send failed: the client is gone
}

func (st *stream) take(in *inspectpb.Incoming) error {
	switch m := in.Request.Message.(type) {
	case *inspectpb.InspectRequest_Start:
		return st.begin(m.Start)
	case *inspectpb.InspectRequest_Chunk:
		return st.chunk(m.Chunk, in.Pieces())
	}
	return inspectpb.ToStatus(pipeline.Invalid("message: got neither start nor chunk"))
}

func (st *stream) begin(start *inspectpb.FrameStart) error {
	delete(st.refused, start.Frame)
	if _, open := st.frames[start.Frame]; open {
		return inspectpb.ToStatus(pipeline.Invalid("frame: number %d is still open on this stream; number frames anew", start.Frame))
	}
	if len(st.frames) >= maxOpenFrames {
		return inspectpb.ToStatus(pipeline.Invalid("frame: %d frames are open on this stream, want at most %d", len(st.frames), maxOpenFrames))
	}
	h, err := inspectpb.ToFrameHeader(start.Header)
	if err != nil {
		return st.refuse(start.Frame, h, start.Header, err)
	}
	r, err := st.intake.Begin(h)
	if err != nil {
		return st.refuse(start.Frame, h, start.Header, err)
	}
	st.frames[start.Frame] = r
	return nil
}

func (st *stream) chunk(c *inspectpb.FrameChunk, pieces [][]byte) error {
	r, open := st.frames[c.Frame]
	if !open {
		if st.refused[c.Frame] {
			return nil
		}
		return inspectpb.ToStatus(pipeline.Invalid("frame: chunk of number %d, which was not started on this stream", c.Frame))
	}
	err := r.Add(c.Offset, pieces...)
	if err == nil && !r.Complete() {
		return nil
	}
	delete(st.frames, c.Frame)
	h := r.Header()
	wire := inspectpb.FromFrameHeader(h)
	if err == nil {
		answer, withdraw := st.await(h, wire)
		if err = r.Submit(st, answer); err == nil {
			return nil
		}
		withdraw()
	}
	r.Abandon()
	return st.refuse(c.Frame, h, wire, err)
}

// await notes that a showing is waited for. It returns what sends the verdict, and what
// takes the note back unless another frame of the showing had made it.
func (st *stream) await(h pipeline.FrameHeader, wire *inspectpb.FrameHeader) (answer intake.Answer, withdraw func()) {
	key := intake.ShowingKey(h)
	st.mu.Lock()
	defer st.mu.Unlock()
	noted := st.waiting[key]
	st.waiting[key] = true
	answer = func(v intake.Verdict, err error) {
		st.mu.Lock()
		defer st.mu.Unlock()
		delete(st.waiting, key)
		st.idle.Broadcast()
		st.send(verdictResponse(v, err, wire))
	}
	return answer, func() {
		st.mu.Lock()
		defer st.mu.Unlock()
		if !noted {
			delete(st.waiting, key)
		}
	}
}

// refuse tells the client why a frame was not taken and has its unit held.
func (st *stream) refuse(number uint32, h pipeline.FrameHeader, wire *inspectpb.FrameHeader, why error) error {
	st.refused[number] = true
	answer, withdraw := st.await(h, wire)
	if !st.intake.Refuse(h, why, st, answer) {
		withdraw()
	}
	st.mu.Lock()
	defer st.mu.Unlock()
	st.send(&inspectpb.InspectResponse{Message: &inspectpb.InspectResponse_Refused{Refused: inspectpb.Refuse(number, wire, why)}})
	return st.failed
}

// send sends one response. The caller holds st.mu, since a stream takes one sender.
func (st *stream) send(r *inspectpb.InspectResponse) {
	if st.failed == nil {
		st.failed = st.grpc.Send(r)
		st.idle.Broadcast()
	}
}

// wait returns when every showing of this stream is answered, or the client is gone.
func (st *stream) wait() error {
	stop := make(chan struct{})
	defer close(stop)
	go func() { // a client that goes away ends the wait
		select {
		case <-st.grpc.Context().Done():
			st.mu.Lock()
			st.failed = st.grpc.Context().Err()
			st.idle.Broadcast()
			st.mu.Unlock()
		case <-stop:
		}
	}()
	st.mu.Lock()
	defer st.mu.Unlock()
	for len(st.waiting) > 0 && st.failed == nil {
		st.idle.Wait()
	}
	return st.failed
}

// abandon gives back the memory of frames that were cut short; the client that left
// resends them.
func (st *stream) abandon() {
	for _, r := range st.frames {
		r.Abandon()
	}
}

// verdictResponse is a verdict, or the refusal of the whole showing (frame 0).
func verdictResponse(v intake.Verdict, err error, wire *inspectpb.FrameHeader) *inspectpb.InspectResponse {
	if err != nil {
		return &inspectpb.InspectResponse{Message: &inspectpb.InspectResponse_Refused{Refused: inspectpb.Refuse(0, wire, err)}}
	}
	return &inspectpb.InspectResponse{Message: &inspectpb.InspectResponse_Verdict{Verdict: unitVerdict(v)}}
}

func unitVerdict(v intake.Verdict) *inspectpb.UnitVerdict {
	return &inspectpb.UnitVerdict{
		Identity: inspectpb.FromIdentity(v.Identity), InspectionId: strconv.FormatInt(v.ID, 10), Judgement: inspectpb.FromJudgement(v.Judgement),
		Coverage: v.Evidence.Coverage, Defects: inspectpb.FromDefects(v.Evidence.Defects), Failures: inspectpb.FromFailures(v.Evidence.Failures),
		Stored: v.Stored, LatencyMs: v.LatencyMS, RequestId: v.RequestID,
	}
}
