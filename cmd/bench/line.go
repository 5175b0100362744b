package main

import (
	"errors"
	"fmt"
	"time"

	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/proto/inspectpb"
)

var errNoVerdict = errors.New("the server ended the stream without a verdict")

// chunkBytes keeps a chunk's message below 1 MiB.
const chunkBytes = 1_000_000

// shot is a frame with its checksum.
type shot struct {
	raw raster.Raw
	sum uint32
}

func shotOf(raw raster.Raw) shot { return shot{raw, pipeline.Checksum(raw.Data)} }

// benchLine is a stream to the server that shows one part after the other.
type benchLine struct {
	stream grpc.BidiStreamingClient[inspectpb.InspectRequest, inspectpb.InspectResponse]
	part   string
	number uint32
}

// send sends the next of the frames as the only one of the next unit.
func (l *benchLine) send(shots ...shot) error {
	l.number++
	raw, sum := shots[int(l.number)%len(shots)].raw, shots[int(l.number)%len(shots)].sum
	h := pipeline.FrameHeader{
		Identity: pipeline.Identity{Part: l.part, Unit: fmt.Sprintf("u%d", l.number), Line: "A", Station: "A1", Attempt: 1, Purpose: pipeline.Production},
		Capture:  pipeline.Capture{Format: raw.Format, Width: raw.Width, Height: raw.Height, ExposureUS: 1000}, View: "ring", Count: 1, Stride: raw.Stride,
		Captured: time.Now(), CRC32C: sum}
	err := l.stream.Send(&inspectpb.InspectRequest{Message: &inspectpb.InspectRequest_Start{Start: &inspectpb.FrameStart{Frame: l.number, Header: inspectpb.FromFrameHeader(h)}}})
	for at := 0; at < len(raw.Data) && err == nil; at += chunkBytes {
		err = l.stream.Send(&inspectpb.InspectRequest{Message: &inspectpb.InspectRequest_Chunk{Chunk: &inspectpb.FrameChunk{
			Frame: l.number, Offset: uint64(at), Data: raw.Data[at:min(at+chunkBytes, len(raw.Data))]}}})
	}
	return err
}

// receive waits for a verdict; one without the defects that the frame has is an error.
func (l *benchLine) receive(leastDefects int) error {
	resp, err := l.stream.Recv()
	if err != nil {
		return fmt.Errorf("%w: %w", errNoVerdict, err)
	}
	v := resp.GetVerdict()
	if v == nil {
		return fmt.Errorf("frame refused: %s", resp.GetRefused().GetMessage())
	}
	if v.Judgement.Verdict != inspectpb.Verdict_VERDICT_ACCEPT || len(v.Defects) < leastDefects {
		return fmt.Errorf("verdict %v with %d defects (%v), want one of acceptance with %d or more", v.Judgement.Verdict, len(v.Defects), v.Judgement.Reasons, leastDefects)
	}
	return nil
}

// show sends one frame and waits for its verdict.
func (l *benchLine) show(leastDefects int, shots ...shot) (time.Duration, error) {
	start := time.Now()
	if err := l.send(shots...); err != nil {
		return 0, err
	}
	err := l.receive(leastDefects)
	return time.Since(start), err
}

// pipelined sends n frames with up to ahead of them unanswered, and returns the time from
// the first byte sent to the last verdict.
func (l *benchLine) pipelined(n, ahead, leastDefects int, shots ...shot) (time.Duration, error) {
	start := time.Now()
	room, sent := make(chan struct{}, ahead), make(chan error, 1)
	go func() {
		var err error
		for range n {
			room <- struct{}{}
			if err = l.send(shots...); err != nil {
				break
			}
		}
		sent <- err
	}()
	for range n {
		if err := l.receive(leastDefects); err != nil {
			return 0, err
		}
		<-room
	}
	return time.Since(start), <-sent
}
