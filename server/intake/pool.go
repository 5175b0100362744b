package intake

import "sync"

// pool runs jobs on a fixed number of workers. Its queue is unbounded in length, but
// what is in it is bounded by the admission's bytes.
type pool struct {
	mu     sync.Mutex // guards queue, closed
	wake   *sync.Cond
	queue  []func()
	closed bool
	wg     sync.WaitGroup
}

func newPool(workers int) *pool {
	p := &pool{}
	p.wake = sync.NewCond(&p.mu)
	for range workers {
		p.wg.Go(p.work)
	}
	return p
}

func (p *pool) work() {
	for {
		p.mu.Lock()
		for len(p.queue) == 0 && !p.closed {
			p.wake.Wait()
		}
		if len(p.queue) == 0 {
			p.mu.Unlock()
			return
		}
		job := p.queue[0]
		p.queue = p.queue[1:]
		p.mu.Unlock()
		job()
	}
}

// do queues a job. It must not be called after close.
func (p *pool) do(job func()) {
	p.mu.Lock()
	p.queue = append(p.queue, job)
	p.mu.Unlock()
	p.wake.Signal()
}

// close lets the workers finish the queue and waits for them.
func (p *pool) close() {
	p.mu.Lock()
	p.closed = true
	p.mu.Unlock()
	p.wake.Broadcast()
	p.wg.Wait()
}
