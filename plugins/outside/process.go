package outside

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"github.com/hashicorp/go-hclog"
	"github.com/hashicorp/go-plugin"
	"google.golang.org/grpc"
	"google.golang.org/grpc/health/grpc_health_v1"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// process is one running process of a stage, from handshake to burial.
type process struct {
	set      Settings
	launched *launched
	client   *plugin.Client
	stub     stagepb.StageServiceClient
	health   grpc_health_v1.HealthClient
	log      lastLines
	input    *ring // nil: pixels travel in messages
	output   *ring
	slots    chan *slot
	answered atomic.Bool  // at least one call was answered well
	underWay atomic.Int64 // calls that were sent and not answered

	mu     sync.Mutex // guards what follows
	cause  string     // why the host killed it; empty = it did not
	blamed bool       // one of its calls is to blame for that; the others are not
}

// slot is the memory of one call, and the right to make it.
type slot struct {
	index      int
	generation uint64
}

// launch starts a process and waits for its handshake. The error says what went wrong in
// the words of whoever wrote the stage.
func launch(set Settings) (*process, error) {
	p := &process{set: set, slots: make(chan *slot, set.MaxConcurrent)}
	for i := range set.MaxConcurrent {
		p.slots <- &slot{index: i}
	}
	if err := p.start(); err != nil {
		p.bury()
		return nil, err
	}
	go p.watchMemory()
	return p, nil
}

func (p *process) start() error {
	base, err := baseFolder()
	if err != nil {
		return err
	}
	dir, err := os.MkdirTemp(base, "stage-")
	if err != nil {
		return err
	}
	if err := p.share(); err != nil {
		return err
	}
	var extra []*os.File
	if p.input != nil {
		extra = []*os.File{p.input.file, p.output.file}
		if p.set.Frames.bytes() > 0 {
			extra = append(extra, p.set.Frames.ring.file)
		}
	}
	p.launched = newLaunched(p.set, dir, extra)
	limit := maxMessage
	if p.input != nil {
		limit = maxAnswer
	}
	p.client = plugin.NewClient(&plugin.ClientConfig{
		HandshakeConfig: handshake(), VersionedPlugins: versions(link{}), AllowedProtocols: []plugin.Protocol{plugin.ProtocolGRPC},
		RunnerFunc: p.launched.withEnv, SkipHostEnv: true, StartTimeout: p.set.StartTimeout, UnixSocketConfig: &plugin.UnixSocketConfig{TempDir: dir},
		Stderr: &p.log, SyncStdout: &p.log, SyncStderr: &p.log, Logger: hclog.NewNullLogger(),
		GRPCDialOptions: []grpc.DialOption{grpc.WithDefaultCallOptions(grpc.MaxCallRecvMsgSize(limit))},
	})
	return p.connect()
}

// share makes the memory files, where pixels do not travel in messages.
func (p *process) share() (err error) {
	if p.set.BytesOnly {
		return nil
	}
	if p.input, err = newInput(p.set.MaxConcurrent, p.set.SlotBytes); errors.Is(err, errNotShared) {
		return nil
	}
	if err == nil {
		p.output, err = newOutput(p.set.MaxConcurrent, p.set.SlotBytes)
	}
	return err
}

func (p *process) connect() error {
	rpc, err := p.client.Client()
	if err != nil {
		return p.startError(err)
	}
	stub, err := rpc.Dispense(serviceName)
	if err != nil {
		return p.startError(err)
	}
	p.stub = stub.(stagepb.StageServiceClient)
	p.health = grpc_health_v1.NewHealthClient(rpc.(*plugin.GRPCClient).Conn)
	return nil
}

// startError says why there was no handshake.
func (p *process) startError(err error) error {
	text := fmt.Sprintf("%v", err)
	line := p.launched.first.String()
	parts := strings.Split(line, "|")
	switch {
	case p.launched.isolation == "": // it never ran
	case len(parts) >= 4 && parts[0] == strconv.Itoa(plugin.CoreProtocolVersion) && parts[1] != strconv.Itoa(ContractVersion):
		text = fmt.Sprintf("it speaks version %s of the stage contract, this program speaks %d; rebuild the plug-in with this program's kit, or update the program", parts[1], ContractVersion)
	case len(parts) < 4 && line != "":
		text = fmt.Sprintf("it printed %q on stdout before the handshake; stdout belongs to the handshake: print on stderr", line)
	case line == "" && strings.Contains(text, "timeout"):
		text = fmt.Sprintf("no handshake within %v; a stage serves before it does long work", p.set.StartTimeout)
	case line == "":
		text = "it ended before the handshake"
		select {
		case <-p.launched.exited:
			text += " (" + p.launched.ended + ")"
			p.launched.lastWords()
		case <-time.After(time.Second):
		}
	}
	return p.withLog("plug-in " + p.set.Name + " (" + p.set.Path + "): " + text)
}

func (p *process) withLog(text string) error {
	if log := p.log.text(); log != "" {
		text += "; last log lines:\n" + log
	}
	return errors.New(text)
}

// kill ends the process and notes why.
func (p *process) kill(cause string) {
	p.mu.Lock()
	if p.cause == "" {
		p.cause = cause
	}
	p.mu.Unlock()
	_ = p.launched.Kill(context.Background())
}

// killFor ends the process because of one of its calls. The error is errGone where
// another call was to blame first.
func (p *process) killFor(cause string) error {
	p.mu.Lock()
	first := !p.blamed
	p.blamed = true
	p.mu.Unlock()
	p.kill(cause)
	if !first {
		return errGone
	}
	return pipeline.Fail(pipeline.Unready, "%w", p.withLog(p.death()))
}

// doomed reports whether the process has ended or is about to.
func (p *process) doomed() bool {
	select {
	case <-p.launched.exited:
		return true
	default:
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	return p.cause != ""
}

// errShared says that a process ended with several units under way.
var errShared = errors.New("with other units under way")

// errGone says that a process ended before a call reached it, or because of another
// call: the item can be given to the next process.
var errGone = errors.New("the stage's process ended because of another unit")

// death says how the process ended; it waits a moment until that and its last words are
// known.
func (p *process) death() string {
	select {
	case <-p.launched.exited:
	case <-time.After(time.Second):
		return "its process does not answer"
	}
	p.launched.lastWords()
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.cause != "" {
		return p.cause
	}
	return "its process ended in mid-call (" + p.launched.ended + ")"
}

// close lets the process end by itself, within a second.
func (p *process) close() {
	done := make(chan struct{})
	go func() { p.client.Kill(); close(done) }()
	select {
	case <-done:
	case <-time.After(time.Second):
		p.kill("closed by the host")
		<-done
	}
	p.bury()
}

// bury ends what is left of a process and frees its memory, once no call uses it.
func (p *process) bury() {
	if p.launched != nil && p.launched.cmd != nil && p.launched.isolation != "" {
		_ = p.launched.Kill(context.Background())
		<-p.launched.exited
		p.client.Kill()
	}
	for range p.set.MaxConcurrent {
		<-p.slots
	}
	p.input.close()
	p.output.close()
	if p.launched != nil {
		os.RemoveAll(p.launched.dir)
	}
}

// watchMemory kills the process when its resident memory passes the bound.
func (p *process) watchMemory() {
	if p.set.MaxRSSBytes == 0 {
		return
	}
	tick := time.NewTicker(50 * time.Millisecond)
	defer tick.Stop()
	for {
		select {
		case <-p.launched.exited:
			return
		case <-tick.C:
		}
		frames := 2*int64(p.set.MaxConcurrent)*p.set.SlotBytes + p.set.Frames.bytes()
		if n := residentBytes(p.launched.cmd.Process.Pid, frames); n > p.set.MaxRSSBytes {
			p.kill(fmt.Sprintf("its resident memory reached %d MB, allowed are %d MB; it was killed", n>>20, p.set.MaxRSSBytes>>20))
			return
		}
	}
}

// baseFolder is where this host's stages have their working folders. Those of hosts that
// are gone are swept away.
func baseFolder() (string, error) {
	const prefix = "lapgate-outside-"
	olds, _ := filepath.Glob(filepath.Join(os.TempDir(), prefix+"*"))
	for _, old := range olds {
		pid, err := strconv.Atoi(strings.TrimPrefix(filepath.Base(old), prefix))
		if err == nil && pid != os.Getpid() && gone(pid) {
			os.RemoveAll(old)
		}
	}
	dir := filepath.Join(os.TempDir(), prefix+strconv.Itoa(os.Getpid()))
	return dir, os.MkdirAll(dir, 0o700)
}
