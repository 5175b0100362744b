package main

import (
	"bufio"
	"bytes"
	"io"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// TestFeedKilledAtAnyMoment kills the program again and again while the server comes
// and goes; each frame's name is told only once, on stdin. Every unit whose frames the
// program had kept must be judged exactly once in the end, and none may be halved.
// What had only been read from stdin when the program was killed is told again, as the
// line would: the server then sees the same frames.
func TestFeedKilledAtAnyMoment(t *testing.T) {
	const units = 60
	p := newPeer(t, "ring", "bar")
	dir := unitsIn(t, units)
	args := append([]string{"run-as-lapgate"}, feedArgs(t, p, "--spool-always", "--give-up", "100ms", "--in-flight", "3", "-")...)
	names, err := picturesIn(dir)
	if err != nil {
		t.Fatal(err)
	}
	lines := map[string]int{}
	for round := range 8 {
		if round%3 == 1 {
			p.start()
		}
		told := names[round*len(names)/8 : (round+1)*len(names)/8]
		for _, l := range runKilled(t, args, told) {
			lines[l.Unit]++
		}
		if round%3 == 1 {
			p.stop()
		}
	}
	p.start()
	got := runFeed(t, t.Context(), strings.NewReader(strings.Join(names, "\n")), args[1:])
	if got.code != 0 {
		t.Fatalf("status %d\n%s", got.code, got.stderr)
	}
	for _, l := range got.lines {
		lines[l.Unit]++
	}
	if recorded := p.recorded(); len(recorded) != units || len(lines) != units {
		t.Errorf("%d units recorded and %d told of, want %d each once", len(recorded), len(lines), units)
	}
	if spool := args[1+indexOf(args[1:], "--spool")+1]; exists(spool) {
		left, _ := filepath.Glob(filepath.Join(spool, "*"))
		t.Errorf("left in the spool: %v", left)
	}
}

func indexOf(list []string, word string) int {
	for i, w := range list {
		if w == word {
			return i
		}
	}
	return -1
}

// runKilled runs the program with the names on stdin and kills it at a random moment.
func runKilled(t *testing.T, args, names []string) []verdictLine {
	t.Helper()
	cmd := exec.Command(os.Args[0], args...)
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	in, err := cmd.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	kill := time.AfterFunc(time.Duration(100+rand.IntN(250))*time.Millisecond, func() { cmd.Process.Kill() })
	defer kill.Stop()
	go io.WriteString(in, strings.Join(names, "\n")+"\n") //nolint:errcheck // it may be killed before
	var whole bytes.Buffer
	for r := bufio.NewReader(out); ; {
		line, err := r.ReadBytes('\n')
		if err != nil {
			break // what is cut is no line
		}
		whole.Write(line)
	}
	cmd.Wait() //nolint:errcheck // it was killed
	if strings.Contains(stderr.String(), "panic") {
		t.Error(stderr.String())
	}
	return parseLines(t, whole.Bytes())
}
