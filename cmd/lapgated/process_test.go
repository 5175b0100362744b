package main

import (
	"bufio"
	"context"
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
	"lapgate/server/ledger"
)

// processRecipe judges one view of 64 × 64 px without calibration.
const processRecipe = `format: 1
part: disc
max_attempts: 0
min_coverage: 0.9
view_timeout_ms: 5000
views:
  - {name: ring, calibration: none, proofs: none, um_per_px: 10, stages: [{type: region}, {type: flatfield}, {type: darkfield, grid_px: 32}, {type: blobs}]}
limits:
  - {name: dig too large, each: diameter_um, at_most: 60, unit: um}
`

// programs are the two real programs, built once.
var programs = sync.OnceValues(func() (string, error) {
	dir, err := os.MkdirTemp("", "lapgate-programs-")
	if err != nil {
		return "", err
	}
	for name, env := range map[string]string{"lapgated": "CGO_ENABLED=1", "lapgate": "CGO_ENABLED=0"} {
		cmd := exec.Command("go", "build", "-o", filepath.Join(dir, name), "lapgate/cmd/"+name)
		cmd.Env = append(os.Environ(), env)
		if out, err := cmd.CombinedOutput(); err != nil {
			return "", fmt.Errorf("building %s: %w\n%s", name, err, out)
		}
	}
	return dir, nil
})

// site is a folder with a server's files and a line's frames.
type site struct {
	t       *testing.T
	bin     string
	dir     string
	address string
	flags   []string // of the server, beside the usual
	server  *exec.Cmd
}

func newSite(t *testing.T, units int) *site {
	t.Helper()
	bin, err := programs()
	if err != nil {
		t.Fatal(err)
	}
	s := &site{t: t, bin: bin, dir: t.TempDir(), address: freeAddress(t)}
	s.write("recipes/disc.yaml", processRecipe)
	for i := range units {
		s.check(files.Write(s.path(fmt.Sprintf("frames/u%04d_ring.pgm", i)), dotFrame(uint64(i))))
	}
	t.Cleanup(s.kill)
	return s
}

func (s *site) path(name string) string { return filepath.Join(s.dir, name) }

func (s *site) check(err error) {
	s.t.Helper()
	if err != nil {
		s.t.Fatal(err)
	}
}

func (s *site) write(name, text string) {
	s.t.Helper()
	s.check(os.MkdirAll(filepath.Dir(s.path(name)), 0o755))
	s.check(os.MkdirAll(s.path("frames"), 0o755))
	s.check(os.WriteFile(s.path(name), []byte(text), 0o644))
}

// dotFrame is noise with, in every third frame, a dig of 8 px.
func dotFrame(seed uint64) raster.Raw {
	rng := rand.New(rand.NewPCG(seed, 3))
	raw := raster.NewRaw(raster.Mono8, 64, 64)
	for i := range raw.Data {
		v := 20 + 1.5*rng.NormFloat64()
		dx, dy := float64(i%64)-30, float64(i/64)-30
		if seed%3 == 0 && dx*dx+dy*dy <= 16 {
			v += 80
		}
		raw.Data[i] = byte(v)
	}
	return raw
}

func freeAddress(t *testing.T) string {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	return l.Addr().String()
}

// serve starts the server and waits until it listens.
func (s *site) serve() {
	s.t.Helper()
	args := append([]string{"serve", "--listen", s.address, "--ledger", s.path("ledger.db"),
		"--recipes", s.path("recipes"), "--calibrations", s.path("calibrations"), "--images", "", "--log-level", "warn", "--development"}, s.flags...)
	s.server = exec.Command(filepath.Join(s.bin, "lapgated"), args...)
	s.server.Stderr = os.Stderr
	s.check(s.server.Start())
	for range 200 {
		if c, err := net.Dial("tcp", s.address); err == nil {
			c.Close()
			return
		}
		time.Sleep(50 * time.Millisecond)
	}
	s.t.Fatal("the server does not listen")
}

// kill ends the server without warning.
func (s *site) kill() {
	if s.server != nil {
		_ = s.server.Process.Kill()
		_ = s.server.Wait()
		s.server = nil
	}
}

// feedCommand feeds all frames; its verdicts go to the file given, one JSON line each.
func (s *site) feedCommand(ctx context.Context, verdicts string, more ...string) *exec.Cmd {
	args := append([]string{"feed", s.path("frames"), "--server", s.address, "--spool", s.path("spool"), "--part", "disc", "--lot", "L1",
		"--line", "A", "--station", "A1", "--quiet", "--give-up", "60s"}, more...)
	cmd := exec.CommandContext(ctx, filepath.Join(s.bin, "lapgate"), args...)
	out, err := os.OpenFile(s.path(verdicts), os.O_CREATE|os.O_APPEND|os.O_WRONLY, 0o644)
	s.check(err)
	s.t.Cleanup(func() { out.Close() })
	cmd.Stdout, cmd.Stderr = out, os.Stderr
	return cmd
}

// answered reads the verdicts that feed printed.
func (s *site) answered(verdicts string) []map[string]any {
	s.t.Helper()
	f, err := os.Open(s.path(verdicts))
	s.check(err)
	defer f.Close()
	var out []map[string]any
	lines := bufio.NewScanner(f)
	lines.Buffer(nil, 1<<20)
	for lines.Scan() {
		var v map[string]any
		if json.Unmarshal(lines.Bytes(), &v) == nil { // the last line of a killed feed may be cut
			out = append(out, v)
		}
	}
	return out
}

// Every answered verdict is in the ledger, none twice, however often the server is
// killed without warning while 500 units are fed.
func TestKilledServerLosesNothing(t *testing.T) {
	units, kills := 500, 4
	if testing.Short() {
		units, kills = 60, 2
	}
	s := newSite(t, units)
	s.serve()
	ctx, cancel := context.WithTimeout(context.Background(), 4*time.Minute)
	defer cancel()
	feed := s.feedCommand(ctx, "verdicts.jsonl")
	s.check(feed.Start())
	for range kills {
		time.Sleep(time.Duration(200+rand.IntN(600)) * time.Millisecond)
		s.kill()
		s.serve()
	}
	if err := feed.Wait(); err != nil {
		t.Errorf("feed: %v", err)
	}
	s.kill()
	s.compare(units)
}

// compare holds what was answered against the ledger.
func (s *site) compare(units int) {
	s.t.Helper()
	store, err := ledger.Open(context.Background(), s.path("ledger.db"))
	s.check(err)
	defer store.Close()
	recorded := map[string]string{} // unit → inspection
	verdicts := map[string]string{}
	for page := (ledger.Page{Limit: 1000}); ; {
		list, err := store.Showings(context.Background(), ledger.Filter{}, page)
		s.check(err)
		for _, sh := range list.List {
			if first, twice := recorded[sh.Unit]; twice {
				s.t.Errorf("unit %s was recorded twice: %s and %d", sh.Unit, first, sh.ID)
			}
			recorded[sh.Unit], verdicts[sh.Unit] = fmt.Sprint(sh.ID), string(sh.Judgement.Verdict)
		}
		if page.After = list.Next; page.After == "" {
			break
		}
	}
	answered := s.answered("verdicts.jsonl")
	for _, v := range answered {
		unit, id := v["unit"].(string), v["inspection_id"].(string)
		if recorded[unit] != id || verdicts[unit] != v["verdict"] {
			s.t.Errorf("unit %s was answered %v by inspection %s; the ledger has %s by %s", unit, v["verdict"], id, verdicts[unit], recorded[unit])
		}
	}
	if len(recorded) != units || len(answered) < units {
		s.t.Errorf("%d units recorded and %d answers for %d units", len(recorded), len(answered), units)
	}
}

// A line PC that restarts its counter never gets an old unit's verdict.
func TestRestartedCounter(t *testing.T) {
	s := newSite(t, 3)
	s.serve()
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	s.check(s.feedCommand(ctx, "first.jsonl").Run())
	s.check(files.Write(s.path("frames/u0001_ring.pgm"), dotFrame(1000)))
	err := s.feedCommand(ctx, "second.jsonl").Run()
	if code, ok := err.(*exec.ExitError); !ok || code.ExitCode() != exitFailure {
		t.Errorf("feed of an old id with new frames: %v, want exit status 1", err)
	}
	for _, v := range s.answered("second.jsonl") {
		reasons := fmt.Sprint(v["reasons"])
		if v["unit"] == "u0001" && (v["verdict"] != "hold" || !strings.Contains(reasons, "identity conflict")) {
			t.Errorf("unit u0001 got %v because of %s, want hold because of an identity conflict", v["verdict"], reasons)
		}
	}
}

// A frame of 12 megapixels passes from feed to verdict.
func TestTwelveMegapixels(t *testing.T) {
	s := newSite(t, 0)
	s.serve()
	raw := raster.NewRaw(raster.Mono8, 4000, 3000)
	rng := rand.New(rand.NewPCG(12, 1))
	for i := range raw.Data {
		raw.Data[i] = byte(20 + 1.5*rng.NormFloat64())
	}
	for y := 1490; y < 1510; y++ { // a dig of 20 px
		for x := 1990; x < 2010; x++ {
			raw.Data[y*4000+x] = 120
		}
	}
	s.check(files.Write(s.path("frames/large_ring.pgm"), raw))
	ctx, cancel := context.WithTimeout(context.Background(), 2*time.Minute)
	defer cancel()
	s.check(s.feedCommand(ctx, "large.jsonl").Run())
	v := s.answered("large.jsonl")
	if len(v) != 1 || v[0]["verdict"] != "reject" || len(v[0]["defects"].([]any)) != 1 {
		t.Errorf("verdicts %v, want one reject with one defect", v)
	}
}

// A recipe saved broken keeps the last good one in force.
func TestBrokenRecipeKeepsTheLastGoodOne(t *testing.T) {
	s := newSite(t, 1)
	s.serve()
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	s.write("recipes/disc.yaml", strings.Replace(processRecipe, "at_most: 60", "at_most: sixty", 1))
	time.Sleep(1500 * time.Millisecond)
	s.check(s.feedCommand(ctx, "kept.jsonl").Run())
	if v := s.answered("kept.jsonl"); len(v) != 1 || v[0]["verdict"] != "reject" {
		t.Errorf("verdicts %v, want the last good recipe's reject", v)
	}
	s.write("recipes/disc.yaml", strings.Replace(processRecipe, "at_most: 60", "at_most: 600", 1))
	time.Sleep(1500 * time.Millisecond)
	s.check(s.feedCommand(ctx, "new.jsonl", "--attempt", "2").Run())
	if v := s.answered("new.jsonl"); len(v) != 1 || v[0]["verdict"] != "accept" {
		t.Errorf("verdicts %v, want the new recipe's accept", v)
	}
}
