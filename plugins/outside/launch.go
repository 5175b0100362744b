package outside

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"maps"
	"os"
	"os/exec"
	"slices"
	"strings"
	"sync"
	"time"

	"github.com/hashicorp/go-hclog"
	"github.com/hashicorp/go-plugin/runner"
)

// launched is a process of a stage, as go-plugin's Runner. It lives in a namespace or
// dies by a signal when the host dies; isolation says which.
type launched struct {
	set    Settings
	env    []string   // of the handshake
	dir    string     // working folder
	extra  []*os.File // the memory files
	first  firstLine
	cmd    *exec.Cmd
	stdout io.ReadCloser
	stderr io.ReadCloser
	said   chan struct{} // closed when nothing more comes on stderr
	exited chan struct{} // closed when the process has ended
	ended  string        // how, once exited is closed

	isolation string
}

var _ runner.Runner = (*launched)(nil)

func newLaunched(set Settings, dir string, extra []*os.File) *launched {
	return &launched{set: set, dir: dir, extra: extra, said: make(chan struct{}), exited: make(chan struct{})}
}

// prepare returns the command of one attempt to start.
func (l *launched) prepare() error {
	cmd := exec.Command(l.set.Path, l.set.Args...)
	cmd.Dir, cmd.ExtraFiles = l.dir, l.extra
	cmd.Env = append([]string{"PATH=/usr/local/bin:/usr/bin:/bin", "LANG=C.UTF-8", "HOME=" + l.dir, "TMPDIR=" + l.dir}, l.env...)
	for _, name := range slices.Sorted(maps.Keys(l.set.Env)) {
		cmd.Env = append(cmd.Env, name+"="+l.set.Env[name])
	}
	var err error
	if l.stdout, err = cmd.StdoutPipe(); err != nil {
		return err
	}
	if l.stderr, err = cmd.StderrPipe(); err != nil {
		return err
	}
	l.cmd = cmd
	return nil
}

// withEnv is go-plugin's RunnerFunc: it takes over the handshake's environment.
func (l *launched) withEnv(_ hclog.Logger, cmd *exec.Cmd, _ string) (runner.Runner, error) {
	l.env = cmd.Env
	return l, nil
}

// Start implements runner.Runner.
func (l *launched) Start(context.Context) error {
	started := make(chan error, 1)
	go l.live(started)
	return <-started
}

// Wait implements runner.AttachedRunner.
func (l *launched) Wait(context.Context) error {
	<-l.exited
	return nil
}

// Kill implements runner.AttachedRunner.
func (l *launched) Kill(context.Context) error {
	select {
	case <-l.exited:
		return nil
	default:
		return killGroup(l.cmd)
	}
}

// closePipes lets readers end that a child of the process still holds open.
func (l *launched) closePipes() {
	l.lastWords()
	l.stdout.Close()
	l.stderr.Close()
}

// Stdout implements runner.Runner; the first line is kept for messages.
func (l *launched) Stdout() io.ReadCloser {
	return struct {
		io.Reader
		io.Closer
	}{io.TeeReader(l.stdout, &l.first), l.stdout}
}

// Stderr implements runner.Runner. Its last words have been taken in when said is closed.
func (l *launched) Stderr() io.ReadCloser { return &untilEnd{ReadCloser: l.stderr, end: l.said} }

// lastWords waits for what the ended process has said; not long, for a child of it may
// keep stderr open.
func (l *launched) lastWords() {
	select {
	case <-l.said:
	case <-time.After(lastWordsWithin):
	}
}

const lastWordsWithin = 200 * time.Millisecond

// untilEnd is a reader that closes a channel when it is asked for more at its end.
type untilEnd struct {
	io.ReadCloser
	end  chan struct{}
	once sync.Once
}

// Read implements io.Reader.
func (u *untilEnd) Read(p []byte) (int, error) {
	n, err := u.ReadCloser.Read(p)
	if n == 0 && err != nil {
		u.once.Do(func() { close(u.end) })
	}
	return n, err
}

// Name implements runner.Runner.
func (l *launched) Name() string { return l.set.Path }

// ID implements runner.AttachedRunner.
func (l *launched) ID() string {
	if l.cmd == nil || l.cmd.Process == nil {
		return ""
	}
	return fmt.Sprint(l.cmd.Process.Pid)
}

// Diagnose implements runner.Runner; the host says more itself.
func (l *launched) Diagnose(context.Context) string { return "" }

// PluginToHost implements runner.AddrTranslator.
func (l *launched) PluginToHost(network, address string) (string, string, error) {
	return network, address, nil
}

// HostToPlugin implements runner.AddrTranslator.
func (l *launched) HostToPlugin(network, address string) (string, string, error) {
	return network, address, nil
}

// firstLine keeps the first line written to it.
type firstLine struct {
	mu   sync.Mutex
	text []byte
	done bool
}

// Write implements io.Writer.
func (f *firstLine) Write(p []byte) (int, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	if line, _, found := bytes.Cut(p, []byte("\n")); !f.done {
		f.text = append(f.text, line[:min(len(line), lineLength)]...)
		f.done = found || len(f.text) >= lineLength
	}
	return len(p), nil
}

func (f *firstLine) String() string {
	f.mu.Lock()
	defer f.mu.Unlock()
	return strings.TrimSpace(strings.ToValidUTF8(string(f.text), "?"))
}
