package main

import (
	"io"
	"os"
	"sync/atomic"
	"time"

	"github.com/mattn/go-isatty"
	"github.com/vbauerster/mpb/v8"
	"github.com/vbauerster/mpb/v8/decor"
)

// volumeProgress is a bar on a terminal once the work takes longer than a
// second; elsewhere it is silent.
type volumeProgress struct {
	done, total atomic.Int64
	quit, gone  chan struct{}
}

func showVolumeProgress(w io.Writer) *volumeProgress {
	p := &volumeProgress{quit: make(chan struct{}), gone: make(chan struct{})}
	f, ok := w.(*os.File)
	if !ok || !isatty.IsTerminal(f.Fd()) {
		close(p.gone)
		return p
	}
	go p.show(f)
	return p
}

// update may be called from several goroutines.
func (p *volumeProgress) update(done, total int) {
	p.done.Store(int64(done))
	p.total.Store(int64(total))
}

func (p *volumeProgress) show(w io.Writer) {
	defer close(p.gone)
	select {
	case <-p.quit:
		return
	case <-time.After(time.Second):
	}
	container := mpb.New(mpb.WithOutput(w))
	bar := container.AddBar(max(1, p.total.Load()), mpb.PrependDecorators(decor.Name("volume plan "), decor.Percentage()))
	tick := time.NewTicker(100 * time.Millisecond)
	defer tick.Stop()
	for {
		select {
		case <-p.quit:
			bar.Abort(true)
			container.Wait()
			return
		case <-tick.C:
			bar.SetTotal(max(1, p.total.Load()), false)
			bar.SetCurrent(p.done.Load())
		}
	}
}

// stop leaves the terminal as it was.
func (p *volumeProgress) stop() {
	close(p.quit)
	<-p.gone
}
