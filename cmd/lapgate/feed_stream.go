package main

import (
	"context"
	"errors"
	"io"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// chunkBytes keeps a whole message below 1 MiB.
const chunkBytes = 1_000_000

// job is a frame on its way out. Its pixels are sent from where they lie and must not be
// altered any more.
type job struct {
	number uint32
	header pipeline.FrameHeader
	pixels []byte
}

// link is one stream to the server: a sender and a receiver goroutine between
// channels. After ended has given its error nothing more comes.
type link struct {
	jobs      chan job
	responses chan *inspectpb.InspectResponse
	ended     chan error // the server's error; nil when it closed the stream
	cancel    context.CancelFunc
	ctx       context.Context
	stream    inspectpb.InspectionService_InspectClient
}

// openLink opens the stream; it fails at once where there is no server.
func openLink(ctx context.Context, client inspectpb.InspectionServiceClient) (*link, error) {
	ctx, cancel := context.WithCancel(ctx)
	stream, err := client.Inspect(ctx)
	if err != nil {
		cancel()
		return nil, err
	}
	l := &link{jobs: make(chan job), responses: make(chan *inspectpb.InspectResponse), ended: make(chan error, 1),
		cancel: cancel, ctx: ctx, stream: stream}
	go l.receive()
	go l.send()
	return l, nil
}

func (l *link) receive() {
	for {
		r, err := l.stream.Recv()
		if err != nil {
			if errors.Is(err, io.EOF) {
				err = nil
			}
			l.ended <- err
			l.cancel()
			return
		}
		select {
		case l.responses <- r:
		case <-l.ctx.Done():
		}
	}
}

// send sends frames until the stream breaks; why it broke is for the receiver to say.
func (l *link) send() {
	for {
		select {
		case j := <-l.jobs:
			if err := l.sendFrame(j); err != nil {
				return
			}
		case <-l.ctx.Done():
			return
		}
	}
}

func (l *link) sendFrame(j job) error {
	start := &inspectpb.FrameStart{Frame: j.number, Header: inspectpb.FromFrameHeader(j.header)}
	if err := l.stream.Send(&inspectpb.InspectRequest{Message: &inspectpb.InspectRequest_Start{Start: start}}); err != nil {
		return err
	}
	for at := 0; at < len(j.pixels); at += chunkBytes {
		chunk := &inspectpb.FrameChunk{Frame: j.number, Offset: uint64(at), Data: j.pixels[at:min(at+chunkBytes, len(j.pixels))]}
		if err := l.stream.Send(&inspectpb.InspectRequest{Message: &inspectpb.InspectRequest_Chunk{Chunk: chunk}}); err != nil {
			return err
		}
	}
	return nil
}
