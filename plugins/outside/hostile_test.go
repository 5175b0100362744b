package outside

import (
	"context"
	"fmt"
	"math"
	"os"
	"os/exec"
	"strings"
	"testing"
	"time"

	"github.com/hashicorp/go-plugin"
	"golang.org/x/sys/unix"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// hostile is a stage that sums pixels, and turns on its host when the first pixel of a
// frame is 255.
type hostile struct {
	*service
	how string
}

func serveHostile(args []string) {
	switch how := args[0]; how {
	case "prints":
		fmt.Println("hello, here I am")
	case "version":
		plugin.Serve(&plugin.ServeConfig{HandshakeConfig: handshake(), GRPCServer: plugin.DefaultGRPCServer,
			VersionedPlugins: map[int]plugin.PluginSet{7: {serviceName: link{service: &stagepb.UnimplementedStageServiceServer{}}}}})
	case "ends":
		fmt.Fprintln(os.Stderr, "no licence for polishing")
		os.Exit(4)
	case "sleeps":
		time.Sleep(time.Minute)
	case "child":
		keepFromChildren()
		if err := exec.Command("/bin/sleep", "300").Start(); err != nil {
			panic(err)
		}
	case "second start":
		if _, err := os.Stat(args[1]); err == nil {
			fmt.Println("started again")
			os.Exit(5)
		}
		os.WriteFile(args[1], nil, 0o600)
	}
	f := probeFactory()
	f.Writes = []string{"sum", "region", "geometry", "coverage", "defects", "bad pixels"}
	s, err := newService(f)
	if err != nil {
		panic(err)
	}
	serveContract(&hostile{s, args[0]})
	os.Exit(0)
}

// Run implements the contract.
func (h *hostile) Run(ctx context.Context, req *stagepb.RunRequest) (*stagepb.RunResponse, error) {
	res, err := h.service.Run(ctx, req)
	px, _ := h.memory.fetch(req.GetItem().GetFrames()[0].GetPixels())
	if err != nil || px[0] != 255 {
		return res, err
	}
	fmt.Fprintln(os.Stderr, "about to go wrong:", h.how)
	if misbehave := misdeeds()[h.how]; misbehave != nil {
		misbehave(h, req, res, px)
	}
	return res, nil
}

type misdeed func(h *hostile, req *stagepb.RunRequest, res *stagepb.RunResponse, px []byte)

// misdeeds are what a process can do to its host.
func misdeeds() map[string]misdeed {
	plane := func(shared *stagepb.SharedBytes) *stagepb.Plane {
		return &stagepb.Plane{Name: "sum", Width: 2, Height: 2, Stride: 2, Pixels: &stagepb.Pixels{Where: &stagepb.Pixels_Shared{Shared: shared}}}
	}
	return map[string]misdeed{
		"panic":        func(*hostile, *stagepb.RunRequest, *stagepb.RunResponse, []byte) { panic("the lap is worn") },
		"segv":         func(*hostile, *stagepb.RunRequest, *stagepb.RunResponse, []byte) { crash() },
		"hang":         func(*hostile, *stagepb.RunRequest, *stagepb.RunResponse, []byte) { select {} },
		"leak":         func(*hostile, *stagepb.RunRequest, *stagepb.RunResponse, []byte) { leak() },
		"write":        func(_ *hostile, _ *stagepb.RunRequest, _ *stagepb.RunResponse, px []byte) { px[0] = 1 },
		"second start": func(*hostile, *stagepb.RunRequest, *stagepb.RunResponse, []byte) { os.Exit(6) },
		"fork": func(*hostile, *stagepb.RunRequest, *stagepb.RunResponse, []byte) {
			child := exec.Command("/bin/sleep", "300")
			child.Stdout, child.Stderr = os.Stdout, os.Stderr
			_ = child.Start()
			fmt.Fprintln(os.Stderr, "child", child.Process.Pid)
			os.Exit(0)
		},
		"huge": func(_ *hostile, _ *stagepb.RunRequest, res *stagepb.RunResponse, _ []byte) {
			res.Planes = []*stagepb.Plane{{Name: "sum", Pixels: &stagepb.Pixels{Where: &stagepb.Pixels_Data{Data: make([]byte, maxAnswer+1)}}}}
		},
		"garbage": func(_ *hostile, _ *stagepb.RunRequest, res *stagepb.RunResponse, _ []byte) {
			res.Planes = []*stagepb.Plane{{Name: "sum", Width: -3, Height: 1 << 30, Stride: 5}}
		},
		"nan": func(_ *hostile, _ *stagepb.RunRequest, res *stagepb.RunResponse, _ []byte) {
			res.Measurements = append(res.Measurements, &stagepb.Measurement{Name: "rms", Value: math.NaN()})
		},
		"generation": func(_ *hostile, req *stagepb.RunRequest, res *stagepb.RunResponse, _ []byte) {
			o := req.Output
			res.Planes = []*stagepb.Plane{plane(&stagepb.SharedBytes{Path: o.Path, Offset: o.Offset, Length: 16, Generation: o.Generation - 1})}
		},
		"late": func(h *hostile, req *stagepb.RunRequest, res *stagepb.RunResponse, _ []byte) {
			o := req.Output
			mem, err := h.memory.view(o.Path, unix.PROT_READ|unix.PROT_WRITE)
			if err != nil {
				panic(err)
			}
			res.Planes = []*stagepb.Plane{plane(&stagepb.SharedBytes{Path: o.Path, Offset: o.Offset, Length: 16, Generation: o.Generation})}
			go func() {
				time.Sleep(50 * time.Millisecond)
				for i := range 16 {
					mem[o.Offset+uint64(i)] = 0x3f
				}
			}()
		},
		"elsewhere": func(_ *hostile, req *stagepb.RunRequest, res *stagepb.RunResponse, _ []byte) {
			o := req.Output
			res.Planes = []*stagepb.Plane{plane(&stagepb.SharedBytes{Path: o.Path, Offset: o.Offset + o.Length - 8, Length: 16, Generation: o.Generation})}
		},
		"region": func(_ *hostile, _ *stagepb.RunRequest, res *stagepb.RunResponse, _ []byte) {
			res.Region = &stagepb.Region{Width: 24, Height: 16, Zones: []*stagepb.Zone{{Name: "all", Runs: []int32{8, 4, 7}}}}
		},
		"scale": func(_ *hostile, _ *stagepb.RunRequest, res *stagepb.RunResponse, _ []byte) {
			res.Geometry = &stagepb.Geometry{Planar: &stagepb.Planar{UmPerPx: 0.01}}
		},
		"outline": func(_ *hostile, _ *stagepb.RunRequest, res *stagepb.RunResponse, _ []byte) {
			res.Region = &stagepb.Region{Width: 24, Height: 16, Zones: []*stagepb.Zone{{Name: "all", Runs: []int32{8, 0, 24}, Outline: &stagepb.Outline{CentreX: 12, CentreY: 8, OuterPx: 3}}}}
		},
		"ring": func(_ *hostile, _ *stagepb.RunRequest, res *stagepb.RunResponse, _ []byte) {
			res.Geometry = &stagepb.Geometry{Annulus: &stagepb.Annulus{CentreX: 11, CentreY: 7, InnerPx: 2, OuterPx: 6, InnerUm: 1, OuterUm: 1, SlantUm: 1}}
		},
	}
}

func crash() {
	mem, err := unix.Mmap(-1, 0, 4096, unix.PROT_NONE, unix.MAP_ANON|unix.MAP_PRIVATE)
	if err != nil {
		panic(err)
	}
	mem[0] = 1
}

func leak() {
	var kept [][]byte
	for {
		b := make([]byte, 4<<20)
		for i := range b {
			b[i] = byte(i)
		}
		kept = append(kept, b)
		time.Sleep(time.Millisecond)
		_ = kept
	}
}

// Each misdeed holds its unit with a message that names the cause; the stage stands
// again for the next unit, with the right answer, in another process, and the host's
// own memory is as it was.
func TestHostileStage(t *testing.T) {
	for how, want := range map[string]string{
		"panic": "panic: the lap is worn", "segv": "unexpected fault address", "hang": "no answer within 500ms; it was killed",
		"leak": "its resident memory reached", "write": "unexpected fault address", "fork": "its process ended in mid-call (exit status 0)",
		"huge": "its answer is too large", "garbage": `plane "sum": got -3 × 1073741824 px`, "nan": `measurement "rms" is NaN`,
		"generation": "it was written for another call", "elsewhere": "shared memory: got bytes", "region": "region: it has 3 px, want at least 4",
		"scale": "the scale is 0.01 µm/px, before it was 10", "outline": "its pixel (0, 8) lies 9.0 px outside of its outline",
		"ring": "the ring's diameters give 0.25 um of arc per px at its middle, the view's um_per_px is 10",
	} {
		t.Run(how, func(t *testing.T) {
			t.Parallel()
			s := settingsFor("hostile", how)
			s.Deadline, s.MaxConcurrent = 30*time.Second, 1
			switch how {
			case "hang":
				s.Deadline = 500 * time.Millisecond
			case "leak":
				s.MaxRSSBytes = 160 << 20
			case "huge":
				s.MaxRSSBytes = 4 << 30
			}
			h := open(t, s)
			stage := newStage(t, h.Factory(), "{}")
			first := run(t, stage, tiny(1))
			bad := tiny(255)
			before := strings.Clone(string(bad.Frames[0].Raw.Data))
			err := stage.Run(context.Background(), bad)
			if err == nil || !strings.Contains(err.Error(), want) || !strings.Contains(err.Error(), "plug-in hostile "+how) ||
				!strings.Contains(err.Error(), "last log lines:\n") || !strings.Contains(err.Error(), "about to go wrong: "+how) {
				t.Errorf("got %v\nwant %q, the plug-in's name and its last log lines", err, want)
			}
			if len(bad.Measurements) > 0 || bad.Region != nil || bad.Planes != nil || string(bad.Frames[0].Raw.Data) != before {
				t.Errorf("the item has changed: %+v", bad)
			}
			if second := run(t, stage, tiny(2)); second == first {
				t.Error("the process was not replaced")
			}
			if st := h.Status(); st.State != Up || st.Restarts != 1 {
				t.Errorf("got %+v, want it up after one restart", st)
			}
		})
	}
}

// run returns the process that a good unit was answered by.
func run(t *testing.T, stage pipeline.Stage, item *pipeline.Item) float64 {
	t.Helper()
	if err := stage.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	if got, _ := item.Number("sum"); got != sumOf(item) {
		t.Errorf("sum %g, want %g", got, sumOf(item))
	}
	born, _ := item.Number("born")
	return born
}

// What goes wrong before the handshake is told when the stage is opened.
func TestHostileStart(t *testing.T) {
	for how, want := range map[string]string{
		"prints":  `it printed "hello, here I am" on stdout before the handshake`,
		"version": "it speaks version 7 of the stage contract, this program speaks 1",
		"ends":    "it ended before the handshake (exit status 4); last log lines:\nno licence for polishing",
		"sleeps":  "no handshake within 300ms",
	} {
		s := settingsFor("hostile", how)
		s.StartTimeout = 300 * time.Millisecond
		if how != "sleeps" {
			s.StartTimeout = 10 * time.Second
		}
		_, err := Open(context.Background(), s, nil)
		if err == nil || !strings.Contains(err.Error(), want) || !strings.Contains(err.Error(), "plug-in hostile "+how) {
			t.Errorf("%s: got %v, want %q", how, err, want)
		}
	}
	s := settingsFor("none")
	s.Path = "/nowhere/stage"
	if _, err := Open(context.Background(), s, nil); err == nil || !strings.Contains(err.Error(), "no such file") {
		t.Errorf("got %v", err)
	}
}

// A stage that cannot be started again spends its budget, is down, and holds.
func TestStageThatDoesNotStartAgain(t *testing.T) {
	s := settingsFor("hostile", "second start", t.TempDir()+"/started")
	s.RestartBudget, s.Backoff = 3, time.Millisecond
	h := open(t, s)
	stage := newStage(t, h.Factory(), "{}")
	if err := stage.Run(context.Background(), tiny(255)); err == nil {
		t.Fatal("no error")
	}
	eventually(t, "the stage is down", func() bool { return h.Status().State == Down })
	err := stage.Run(context.Background(), tiny(1))
	for _, want := range []string{"the stage is down: its 3 restarts within 10m0s are spent", "mend the plug-in: it is tried again when its program changes, and after 10m0s", `printed "started again" on stdout`} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q", err, want)
		}
	}
}

// The input can be neither written nor mapped for writing by whoever has its descriptor,
// and neither file can change its size; the host still writes its own mapping.
func TestSeals(t *testing.T) {
	in, err := newInput(1, 4096)
	if err != nil {
		t.Fatal(err)
	}
	defer in.close()
	path := fmt.Sprintf("/proc/self/fd/%d", in.file.Fd())
	again, err := os.OpenFile(path, os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	defer again.Close()
	if _, err := again.Write([]byte{1}); err == nil {
		t.Error("the input can be written")
	}
	if _, err := unix.Mmap(int(again.Fd()), 0, 4096, unix.PROT_READ|unix.PROT_WRITE, unix.MAP_SHARED); err == nil {
		t.Error("the input can be mapped for writing")
	}
	out, err := newOutput(1, 4096)
	if err != nil {
		t.Fatal(err)
	}
	defer out.close()
	for _, f := range []*os.File{again, out.file} {
		if f.Truncate(0) == nil || f.Truncate(1<<20) == nil {
			t.Error("a memory file can change its size")
		}
	}
	in.slotAt(0)[0] = 9
	view, err := unix.Mmap(int(again.Fd()), 0, 4096, unix.PROT_READ, unix.MAP_SHARED)
	if err != nil || view[0] != 9 {
		t.Errorf("the stage does not see what the host wrote: %v", err)
	}
}
