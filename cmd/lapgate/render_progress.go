package main

import (
	"io"
	"os"

	"github.com/mattn/go-isatty"
	"github.com/vbauerster/mpb/v8"
	"github.com/vbauerster/mpb/v8/decor"
)

// progress counts finished frames on a terminal; elsewhere it is silent.
type progress struct {
	container *mpb.Progress
	bar       *mpb.Bar
}

func showProgress(w io.Writer, total int) *progress {
	f, ok := w.(*os.File)
	if !ok || !isatty.IsTerminal(f.Fd()) || total == 0 {
		return &progress{}
	}
	container := mpb.New(mpb.WithOutput(f))
	bar := container.AddBar(int64(total),
		mpb.PrependDecorators(decor.Name("frames "), decor.CountersNoUnit("%d / %d")),
		mpb.AppendDecorators(decor.Percentage()))
	return &progress{container: container, bar: bar}
}

func (p *progress) done() {
	if p.bar != nil {
		p.bar.Increment()
	}
}

// stop leaves the terminal as it is, whether all was done or not.
func (p *progress) stop() {
	if p.bar != nil {
		p.bar.Abort(false)
		p.container.Wait()
	}
}
