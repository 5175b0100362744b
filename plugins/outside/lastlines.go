package outside

import (
	"strings"
	"sync"
)

const (
	keptLines  = 12
	lineLength = 240
)

// lastLines is a writer that keeps the last lines written to it. Where a Go program tells
// of its crash, the first lines of that say why, and are what is kept.
type lastLines struct {
	mu    sync.Mutex
	lines []string
	open  []byte // a line without its end
	left  int    // lines still to be kept of a crash; −1 = no more
}

// Write implements io.Writer; it never fails.
func (l *lastLines) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	for _, b := range p {
		if b != '\n' {
			if len(l.open) < lineLength {
				l.open = append(l.open, b)
			}
			continue
		}
		l.add(strings.ToValidUTF8(string(l.open), "?"))
		l.open = l.open[:0]
	}
	return len(p), nil
}

func (l *lastLines) add(line string) {
	if strings.TrimSpace(line) == "" || l.left < 0 {
		return
	}
	if l.left == 0 && tellsOfCrash(line) {
		l.lines, l.left = l.lines[max(len(l.lines)-keptLines/2, 0):], keptLines
	}
	l.lines = append(l.lines, line)
	if l.left > 0 {
		if l.left--; l.left == 0 {
			l.left = -1
		}
		return
	}
	if len(l.lines) > keptLines {
		l.lines = append(l.lines[:0], l.lines[len(l.lines)-keptLines:]...)
	}
}

// tellsOfCrash knows how the Go runtime starts its last words.
func tellsOfCrash(line string) bool {
	for _, start := range []string{"panic: ", "fatal error: ", "unexpected fault address", "SIGSEGV: ", "SIGABRT: "} {
		if strings.HasPrefix(line, start) {
			return true
		}
	}
	return false
}

// text returns the lines that were kept.
func (l *lastLines) text() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	lines := l.lines
	if len(l.open) > 0 && l.left >= 0 {
		lines = append(lines[:len(lines):len(lines)], strings.ToValidUTF8(string(l.open), "?"))
	}
	return strings.Join(lines, "\n")
}
