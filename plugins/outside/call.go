package outside

import (
	"context"
	"fmt"
	"slices"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// take waits for the right to call, and for its memory.
func (p *process) take(ctx context.Context) (*slot, error) {
	select {
	case s := <-p.slots:
		s.generation++
		return s, nil
	case <-p.launched.exited:
		return nil, errGone
	case <-ctx.Done():
		return nil, ctx.Err()
	}
}

// giveBack ends a call. Nobody may look at the slot's memory any more.
func (p *process) giveBack(s *slot) { p.slots <- s }

// packer copies what a stage reads into the slot, unless it lies in the arena.
func (p *process) packer(s *slot) stagepb.Pack {
	if p.input == nil {
		return stagepb.InMessage
	}
	used, mem := 0, p.input.slotAt(s.index)
	return func(data []byte) (*stagepb.Pixels, error) {
		if at, ok := p.set.Frames.offset(data); ok {
			return shared(arenaPath, at, len(data), s.generation), nil
		}
		if len(data) > len(mem)-used {
			return nil, pipeline.Invalid("what the stage reads of this item needs more than the %d MB of a slot; raise slot_mb", len(mem)>>20)
		}
		copy(mem[used:], data)
		px := shared(inputPath, uint64(int64(s.index)*p.input.slot)+uint64(used), len(data), s.generation)
		used += aligned(len(data))
		return px, nil
	}
}

// fetcher copies what a stage wrote out of the slot; only then is it looked at. It
// refuses any other memory, and what was written for another call.
func (p *process) fetcher(s *slot) stagepb.Fetch {
	return func(px *stagepb.Pixels) ([]byte, error) {
		at := px.GetShared()
		if at == nil {
			return stagepb.FromMessage(px)
		}
		if p.output == nil || at.GetPath() != outputPath {
			return nil, fmt.Errorf("shared memory: got %q, want the output that the call named", at.GetPath())
		}
		if at.GetGeneration() != s.generation {
			return nil, fmt.Errorf("shared memory: got generation %d, want %d: it was written for another call", at.GetGeneration(), s.generation)
		}
		base := uint64(int64(s.index) * p.output.slot)
		if at.GetOffset() < base {
			return nil, fmt.Errorf("shared memory: got offset %d, want %d or more", at.GetOffset(), base)
		}
		b, err := part(p.output.slotAt(s.index), at.GetOffset()-base, at.GetLength())
		return slices.Clone(b), err
	}
}

// where tells the stage where it may write; nil = into the message.
func (p *process) where(s *slot) *stagepb.SharedBytes {
	if p.output == nil {
		return nil
	}
	return shared(outputPath, uint64(int64(s.index)*p.output.slot), int(p.output.slot), s.generation).GetShared()
}

// failure says why a call failed: in the stage's own words where it gave an error, else
// in what is known of its process, which is then replaced.
func (p *process) failure(err error) error {
	switch s := status.Convert(err); s.Code() {
	case codes.InvalidArgument:
		return pipeline.Invalid("%s", s.Message())
	case codes.FailedPrecondition:
		return pipeline.Fail(pipeline.Internal, "%s", s.Message())
	case codes.DeadlineExceeded:
		return p.killFor(fmt.Sprintf("no answer within %v; it was killed", p.set.Deadline))
	case codes.ResourceExhausted:
		return p.killFor("its answer is too large: " + s.Message())
	case codes.Unavailable, codes.Canceled: // nobody cancels a call: its connection was closed
		return p.broken(s.Message())
	default:
		return p.killFor(fmt.Sprintf("its answer was refused: %s: %s", s.Code(), s.Message()))
	}
}

// broken says why there is no connection any more: mostly because the process has ended,
// of its own or for another call.
func (p *process) broken(message string) error {
	select {
	case <-p.launched.exited:
	case <-time.After(time.Second):
		return p.killFor("its connection broke: " + message)
	}
	p.mu.Lock()
	other := p.blamed
	p.mu.Unlock()
	if other {
		return errGone
	}
	if p.underWay.Load() > 1 {
		return pipeline.Fail(pipeline.Unready, "%w; %w", p.withLog(p.death()), errShared)
	}
	return pipeline.Fail(pipeline.Unready, "%w", p.withLog(p.death()))
}

// call is one run of a stage on one item.
type call struct {
	remote  *remote
	process *process
	slot    *slot
	item    *pipeline.Item
}

type outcome struct {
	response *stagepb.RunResponse
	err      error
}

// run makes the call. Its deadline is its own: a caller that leaves early is let go, but
// the slot stays taken until the stage has answered or is dead.
func (c *call) run(ctx context.Context) error {
	own, cancel := context.WithTimeout(context.WithoutCancel(ctx), c.process.set.Deadline)
	req, err := c.request(own)
	if err != nil {
		cancel()
		c.process.giveBack(c.slot)
		return err
	}
	done := make(chan outcome, 1)
	c.process.underWay.Add(1)
	go func() {
		defer cancel()
		res, err := c.process.stub.Run(own, req)
		if err == nil {
			c.process.underWay.Add(-1)
		}
		done <- outcome{res, err}
	}()
	select {
	case o := <-done:
		defer c.process.giveBack(c.slot)
		return c.finish(o)
	case <-ctx.Done():
		go c.abandon(done)
		return ctx.Err()
	}
}

// abandon waits for an answer that nobody wants any more.
func (c *call) abandon(done <-chan outcome) {
	if o := <-done; o.err != nil {
		_ = c.process.failure(o.err)
	}
	c.process.giveBack(c.slot)
}

// request opens the stage where that is due and copies the item into the slot.
func (c *call) request(ctx context.Context) (*stagepb.RunRequest, error) {
	handle, err := c.remote.handleIn(ctx, c.process, c.slot)
	if err != nil {
		return nil, err
	}
	item, err := stagepb.FromItem(c.item, c.remote.program.described.GetReads(), c.process.packer(c.slot))
	if err != nil {
		return nil, err
	}
	return &stagepb.RunRequest{Handle: handle, Item: item, Output: c.process.where(c.slot)}, nil
}

// finish checks the answer and only then lays it over the item. A process whose answer
// is refused is replaced.
func (c *call) finish(o outcome) error {
	if o.err != nil {
		return c.process.failure(o.err)
	}
	a := &checker{described: c.remote.program.described, minRegionShare: c.process.set.MinRegionShare, item: c.item, fetch: c.process.fetcher(c.slot)}
	m, err := a.check(o.response)
	if err != nil {
		return c.process.killFor("its answer was refused: " + err.Error())
	}
	c.process.answered.Store(true)
	return m.apply(c.item, c.remote.program.described.GetType())
}
