package main

import (
	"bytes"
	"context"
	"log/slog"
	"os/exec"
	"strings"
	"sync"
	"time"

	"lapgate/pipeline"
)

// rejecter runs a command for every unit that is not accepted, one after another in
// the order of the verdicts, with the verdict's JSON on its stdin.
type rejecter struct {
	argv    []string
	timeout time.Duration
	log     *slog.Logger

	mu      sync.Mutex // guards everything below
	more    *sync.Cond
	queue   []rejection
	closed  bool
	failed  int
	stopped chan struct{}
}

type rejection struct {
	unit string
	json []byte
}

func newRejecter(command string, timeout time.Duration, log *slog.Logger) (*rejecter, error) {
	argv, err := splitArguments(command)
	if err != nil {
		return nil, err
	}
	if _, err := exec.LookPath(argv[0]); err != nil {
		return nil, pipeline.Invalid("reject-cmd: %v", err)
	}
	r := &rejecter{argv: argv, timeout: timeout, log: log, stopped: make(chan struct{})}
	r.more = sync.NewCond(&r.mu)
	go r.run()
	return r, nil
}

func (r *rejecter) add(unit string, json []byte) {
	r.mu.Lock()
	defer r.mu.Unlock()
	r.queue = append(r.queue, rejection{unit, json})
	r.more.Signal()
}

// close waits until the command has run for all, and returns how often it failed.
func (r *rejecter) close() int {
	r.mu.Lock()
	r.closed = true
	r.more.Signal()
	r.mu.Unlock()
	<-r.stopped
	return r.failed
}

func (r *rejecter) run() {
	defer close(r.stopped)
	for {
		r.mu.Lock()
		for len(r.queue) == 0 && !r.closed {
			r.more.Wait()
		}
		if len(r.queue) == 0 {
			r.mu.Unlock()
			return
		}
		next := r.queue[0]
		r.queue = r.queue[1:]
		r.mu.Unlock()
		if err := r.call(next); err != nil {
			r.mu.Lock()
			r.failed++
			r.mu.Unlock()
		}
	}
}

func (r *rejecter) call(next rejection) error {
	ctx, cancel := context.WithTimeout(context.Background(), r.timeout)
	defer cancel()
	cmd := exec.CommandContext(ctx, r.argv[0], r.argv[1:]...)
	cmd.Stdin = bytes.NewReader(next.json)
	cmd.WaitDelay = time.Second
	out, err := cmd.CombinedOutput()
	if err != nil {
		r.log.Error("reject command failed: the unit may still be on the line", "unit", next.unit, "command", strings.Join(r.argv, " "),
			"error", err, "output", strings.TrimSpace(string(out)), "verdict", string(next.json))
	}
	return err
}

// splitArguments splits at spaces; single or double quotes keep an argument together.
// No shell is involved.
func splitArguments(command string) ([]string, error) {
	var out []string
	var word strings.Builder
	inWord, quote := false, rune(0)
	for _, c := range command {
		switch {
		case quote != 0 && c == quote:
			quote = 0
		case quote == 0 && (c == '"' || c == '\''):
			quote, inWord = c, true
		case quote == 0 && (c == ' ' || c == '\t'):
			if inWord {
				out = append(out, word.String())
			}
			word.Reset()
			inWord = false
		default:
			word.WriteRune(c)
			inWord = true
		}
	}
	if quote != 0 {
		return nil, pipeline.Invalid("reject-cmd: %s without its partner in %q", string(quote), command)
	}
	if inWord {
		out = append(out, word.String())
	}
	if len(out) == 0 {
		return nil, pipeline.Invalid("reject-cmd: got nothing, want a program and its arguments")
	}
	return out, nil
}
