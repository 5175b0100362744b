package intake

import (
	"context"
	"fmt"
	"log/slog"
	"sync"
	"sync/atomic"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// Recipes gives the pipeline in force for a part, revision and surface.
type Recipes interface {
	For(id pipeline.Identity) (*pipeline.Pipeline, error)
}

// Verdict is what intake answers for one showing: the inspection as the ledger has it.
type Verdict struct {
	ledger.Inspection
	Stored bool // the same frames had been judged before
}

// Answer is called once per showing and client, with a verdict or with the reason why
// there is none.
type Answer func(Verdict, error)

// Settings are intake's limits. Zero values are refused by New.
type Settings struct {
	MaxBytesInFlight int64
	MaxFrameBytes    int64
	Workers          int
	// Allocate makes the memory of a frame's pixels, which is then used again; nil = Go's own.
	Allocate    func(n int) []byte
	ViewTimeout time.Duration // where the recipe gives none
	Now         func() time.Time
	Log         *slog.Logger
	// Recorded is told of every inspection that the ledger took; it must not block.
	Recorded func(Verdict)
	// Keep is given the frames of a judged showing and returns where each will be kept, or
	// nil; it must not block, and calls release once the pixels are no longer needed (see
	// images.Store.Offer). Nil = none kept.
	Keep func(v pipeline.Verdict, frames []pipeline.Frame, release func()) []string
	// Gate keeps stations from judging units while a master failed or is overdue; nil = none.
	Gate Gate
}

// Gate is what intake asks before it judges a showing; see masters.Gate. conditions say
// what its frames were made with.
type Gate interface {
	// Enter returns what holds the unit; leave is called once it is on record or given up.
	Enter(ctx context.Context, id pipeline.Identity, r *pipeline.Recipe, conditions map[string]string) (holds []pipeline.Failure, leave func(), err error)
	// Check says what a showing of a master proved; nil = it is none.
	Check(r *pipeline.Recipe, in ledger.Inspection, conditions map[string]string) *ledger.MasterCheck
}

// Intake assembles showings and has them judged. It is safe for concurrent use.
type Intake struct {
	settings Settings
	recipes  Recipes
	ledger   Ledger
	memory   *memory
	pool     *pool
	stopping atomic.Bool
	// viewTimeout is where the recipe gives none, in nanoseconds.
	viewTimeout atomic.Int64
	units       keyedLock

	mu       sync.Mutex // guards showings
	showings map[string]*showing
	idle     sync.WaitGroup // one per open showing
}

// New starts intake's workers.
func New(s Settings, recipes Recipes, ledger Ledger) (*Intake, error) {
	if s.MaxBytesInFlight < 1 || s.MaxFrameBytes < 1 || s.Workers < 1 || s.ViewTimeout <= 0 {
		return nil, pipeline.Invalid("intake: got %d bytes in flight, %d bytes a frame, %d workers, time-out %v; want all above zero",
			s.MaxBytesInFlight, s.MaxFrameBytes, s.Workers, s.ViewTimeout)
	}
	if s.Now == nil {
		s.Now = time.Now
	}
	if s.Log == nil {
		s.Log = slog.Default()
	}
	in := &Intake{settings: s, recipes: recipes, ledger: ledger, pool: newPool(s.Workers), showings: map[string]*showing{},
		memory: newMemory(s.MaxBytesInFlight, s.MaxFrameBytes, s.Allocate)}
	in.viewTimeout.Store(int64(s.ViewTimeout))
	return in, nil
}

// Adjust changes limits while frames come in.
func (in *Intake) Adjust(maxBytesInFlight int64, viewTimeout time.Duration) {
	in.memory.bound(maxBytesInFlight)
	in.viewTimeout.Store(int64(viewTimeout))
}

// BytesInFlight returns the bytes of frames held in memory.
func (in *Intake) BytesInFlight() int64 { return in.memory.inFlight() }

// Sent is a frame as it was sent: its pixels lie in pieces, one after the other, which
// are only read.
type Sent struct {
	Header pipeline.FrameHeader
	Pieces [][]byte
}

// Show takes all frames of one showing. Once it returns, the pieces are not needed any
// more; wait waits for the verdict.
func (in *Intake) Show(frames []Sent) (wait func(ctx context.Context) (Verdict, error), err error) {
	if err := oneShowing(frames); err != nil {
		return nil, err
	}
	type outcome struct {
		v   Verdict
		err error
	}
	done := make(chan outcome, 1)
	client := new(byte)
	answer := func(v Verdict, err error) {
		select {
		case done <- outcome{v, err}:
		default: // told already: a frame came after the showing had ended, and opened another
		}
	}
	for _, f := range frames {
		err := in.offer(f, client, answer)
		if err != nil && !in.Refuse(f.Header, err, client, answer) {
			return nil, err
		}
	}
	return func(ctx context.Context) (Verdict, error) {
		select {
		case o := <-done:
			return o.v, o.err
		case <-ctx.Done():
			return Verdict{}, ctx.Err()
		}
	}, nil
}

// oneShowing refuses no frames, and frames of several showings: one verdict is the answer.
func oneShowing(frames []Sent) error {
	if len(frames) == 0 {
		return pipeline.Invalid("frames: got none, want all frames of one showing")
	}
	for _, f := range frames[1:] {
		if first, got := ShowingKey(frames[0].Header), ShowingKey(f.Header); got != first {
			return pipeline.Invalid("frames: got one of %q and one of %q, want those of one showing", first, got)
		}
	}
	return nil
}

func (in *Intake) offer(f Sent, client any, answer Answer) error {
	r, err := in.Begin(f.Header)
	if err != nil {
		return err
	}
	if err = r.Add(0, f.Pieces...); err == nil {
		err = r.Submit(client, answer)
	}
	if err != nil {
		r.Abandon()
	}
	return err
}

// Drain stops taking new showings, waits until the open ones have their verdict or
// grace has passed, and stops the workers. Showings that are still incomplete then get
// no verdict: their frames were never answered, so the line resends them.
func (in *Intake) Drain(grace time.Duration) {
	in.stopping.Store(true)
	done := make(chan struct{})
	go func() { in.idle.Wait(); close(done) }()
	select {
	case <-done:
	case <-time.After(grace):
		in.dropAll(stopping("the server stopped before all views came; resend the unit"))
		<-done
	}
	in.pool.close()
}

// stopping is what a client is told while the server stops.
func stopping(what string) error {
	return retryLater{pipeline.Fail(pipeline.Unready, "%s", what), 2 * time.Second}
}

func (in *Intake) dropAll(why error) {
	in.mu.Lock()
	var open []*showing
	for _, s := range in.showings {
		open = append(open, s)
	}
	in.mu.Unlock()
	for _, s := range open {
		s.drop(why)
	}
}

// keyedLock lets one holder at a time through for each key.
type keyedLock struct {
	mu   sync.Mutex // guards held
	held map[string]chan struct{}
}

func (k *keyedLock) lock(key string) (unlock func()) {
	for {
		k.mu.Lock()
		if k.held == nil {
			k.held = map[string]chan struct{}{}
		}
		wait, taken := k.held[key]
		if !taken {
			mine := make(chan struct{})
			k.held[key] = mine
			k.mu.Unlock()
			return func() {
				k.mu.Lock()
				delete(k.held, key)
				k.mu.Unlock()
				close(mine)
			}
		}
		k.mu.Unlock()
		<-wait
	}
}

// ShowingKey names the showing that a frame belongs to while it is being assembled.
func ShowingKey(h pipeline.FrameHeader) string {
	if h.Unit == "" {
		return fmt.Sprintf("request %s/%s/%s/%s", h.Line, h.Station, h.Part, h.RequestID)
	}
	return h.Identity.Key()
}

func (in *Intake) pending(h pipeline.FrameHeader) bool {
	in.mu.Lock()
	defer in.mu.Unlock()
	_, ok := in.showings[ShowingKey(h)]
	return ok
}
