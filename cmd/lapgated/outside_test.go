package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"image/png"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"
	healthpb "google.golang.org/grpc/health/grpc_health_v1"

	"lapgate/pipeline"
	"lapgate/pipeline/raster/files"
	"lapgate/plugins/deflectometry"
	"lapgate/plugins/outside"
	"lapgate/plugins/unwrap"
	"lapgate/server/ledger"
)

// TestMain runs this test program as a plug-in where its argument says so.
func TestMain(m *testing.M) {
	if len(os.Args) == 2 && os.Args[1] == "serve-brittle" {
		outside.Serve(brittle())
	}
	for _, f := range []pipeline.Factory{unwrap.Factory(), deflectometry.Factory()} {
		if len(os.Args) == 2 && os.Args[1] == "serve-"+f.Type {
			outside.Serve(f)
		}
	}
	os.Exit(m.Run())
}

// brittleSettings are those of the stage that breaks.
type brittleSettings struct {
	BreaksAt int `json:"breaks_at"` // count of the first pixel at which it breaks
}

// Check implements pipeline.Checker.
func (s brittleSettings) Check() error {
	if s.BreaksAt < 1 || s.BreaksAt > 255 {
		return fmt.Errorf("breaks_at: got %d, want 1 to 255", s.BreaksAt)
	}
	return nil
}

// brittle is a stage that ends its process at frames that are marked.
func brittle() pipeline.Factory {
	return pipeline.Make(pipeline.Factory{Type: "brittle", Version: "1", Scope: pipeline.ScopeView, Summary: "Breaks at marked frames.",
		Reads: []string{pipeline.RawPlane}, Writes: []string{"measurements"}}, brittleSettings{BreaksAt: 255},
		func(s brittleSettings, _ pipeline.Environment) (pipeline.Stage, error) {
			return pipeline.StageFunc(func(_ context.Context, item *pipeline.Item) error {
				if int(item.Frames[0].Raw.Data[0]) == s.BreaksAt {
					panic("the brittle stage broke")
				}
				item.Measure("first_dn", float64(item.Frames[0].Raw.Data[0]), "DN")
				return nil
			}), nil
		})
}

// pluginsFileOf lists the brittle stage.
func pluginsFileOf(t *testing.T, dir string, budget int) string {
	t.Helper()
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(dir, "plugins.yaml")
	text := fmt.Sprintf("format: 1\nplugins:\n  - {name: brittle, path: %q, args: [serve-brittle], restart_budget: %d, backoff_ms: 1}\n", self, budget)
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// A real server, a real client and a stage that dies at every 50th unit: each unit has
// one record; those at which the stage died are held with its name, the others judged.
// LAPGATE_LONG=1 makes it 10 000 units.
func TestDyingStageAtTheLine(t *testing.T) {
	units := 600
	switch {
	case testing.Short():
		units = 150
	case os.Getenv("LAPGATE_LONG") != "":
		units = 10_000
	}
	s := newSite(t, 0)
	s.write("recipes/disc.yaml", strings.Replace(processRecipe, "{type: region}", "{type: brittle}, {type: region}", 1))
	for i := range units {
		raw := dotFrame(1)
		raw.Data[0] = 1
		if i%50 == 49 {
			raw.Data[0] = 255
		}
		s.check(files.Write(s.path(fmt.Sprintf("frames/u%05d_ring.pgm", i)), raw))
	}
	s.flags = []string{"--plugins", pluginsFileOf(t, s.dir, 2*units)}
	s.serve()
	ctx, cancel := context.WithTimeout(context.Background(), 10*time.Minute)
	defer cancel()
	if err := s.feedCommand(ctx, "verdicts.jsonl").Run(); err != nil {
		t.Errorf("feed: %v", err)
	}
	s.kill()
	s.compare(units)
	s.checkHeld(units)
}

// checkHeld wants every unit at which the stage died held for that, and no other.
func (s *site) checkHeld(units int) {
	s.t.Helper()
	store, err := ledger.Open(context.Background(), s.path("ledger.db"))
	s.check(err)
	defer store.Close()
	held, besides := 0, 0
	for page := (ledger.Page{Limit: 1000}); ; {
		list, err := store.Showings(context.Background(), ledger.Filter{}, page)
		s.check(err)
		for _, sh := range list.List {
			var n int
			if _, err := fmt.Sscanf(sh.Unit, "u%d", &n); err != nil {
				s.t.Fatalf("unit %q", sh.Unit)
			}
			switch hold := sh.Judgement.Verdict == pipeline.Hold; {
			case hold && n%50 == 49:
				held++
				if text := fmt.Sprint(sh.Judgement.Reasons); !strings.Contains(text, "plug-in brittle: its process ended in mid-call") || !strings.Contains(text, "the brittle stage broke") {
					s.t.Errorf("unit %s is held for %s", sh.Unit, text)
				}
			case hold:
				besides++
			case n%50 == 49:
				s.t.Errorf("unit %s was judged %s although its stage died", sh.Unit, sh.Judgement.Verdict)
			}
		}
		if page.After = list.Next; page.After == "" {
			break
		}
	}
	if held != units/50 || besides > 0 {
		s.t.Errorf("%d held at a death, want %d; %d others, want none", held, units/50, besides)
	}
}

// When the budget is spent the server goes on, holds every unit, and its health service
// says which stage is down.
func TestStageDownAtTheLine(t *testing.T) {
	s := newSite(t, 0)
	s.write("recipes/disc.yaml", strings.Replace(processRecipe, "{type: region}", "{type: brittle}, {type: region}", 1))
	for i := range 12 {
		raw := dotFrame(1)
		raw.Data[0] = 1
		if i < 4 {
			raw.Data[0] = 255
		}
		s.check(files.Write(s.path(fmt.Sprintf("frames/u%05d_ring.pgm", i)), raw))
	}
	s.flags = []string{"--plugins", pluginsFileOf(t, s.dir, 1), "--workers", "1"}
	s.serve()
	state := func() healthpb.HealthCheckResponse_ServingStatus { return s.health("stage.brittle") }
	if state() != healthpb.HealthCheckResponse_SERVING {
		t.Errorf("before: %v", state())
	}
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	if err := s.feedCommand(ctx, "verdicts.jsonl").Run(); err != nil {
		t.Errorf("feed: %v", err)
	}
	if state() != healthpb.HealthCheckResponse_NOT_SERVING {
		t.Errorf("after: %v", state())
	}
	for _, v := range s.answered("verdicts.jsonl") {
		if v["verdict"] != "hold" {
			t.Errorf("got %v", v)
		}
	}
	s.kill()
	s.compare(12)
}

// health asks the server's health service.
func (s *site) health(service string) healthpb.HealthCheckResponse_ServingStatus {
	s.t.Helper()
	conn, err := grpc.NewClient(s.address, grpc.WithTransportCredentials(insecure.NewCredentials()))
	s.check(err)
	defer conn.Close()
	res, err := healthpb.NewHealthClient(conn).Check(context.Background(), &healthpb.HealthCheckRequest{Service: service})
	s.check(err)
	return res.Status
}

func runVerb(t *testing.T, args ...string) (code int, out, errOut string) {
	t.Helper()
	var a, b bytes.Buffer
	code = run(args, &a, &b)
	return code, a.String(), b.String()
}

func TestStagesInsideAndOutsideAlike(t *testing.T) {
	plugins := pluginsFileOf(t, t.TempDir(), 5)
	code, out, errOut := runVerb(t, "stages", "--json", "--plugins", plugins)
	var doc struct {
		Stages []struct {
			Type, Runs string
			Defaults   map[string]any `json:"default_settings"`
		}
	}
	if err := json.Unmarshal([]byte(out), &doc); code != 0 || err != nil {
		t.Fatalf("%d %v\n%s", code, err, errOut)
	}
	runs := map[string]string{}
	for _, s := range doc.Stages {
		runs[s.Type] = s.Runs
		if s.Type == "brittle" && s.Defaults["breaks_at"] != 255. {
			t.Errorf("got %+v", s)
		}
	}
	if runs["blobs"] != "inside" || !filepath.IsAbs(runs["brittle"]) {
		t.Errorf("got %v", runs)
	}
}

// A recipe's settings of a stage outside are checked by that stage, and told with line
// and column.
func TestSettingsOfAStageOutsideInARecipe(t *testing.T) {
	dir := t.TempDir()
	plugins := pluginsFileOf(t, dir, 5)
	recipe := filepath.Join(dir, "disc.yaml")
	for settings, want := range map[string]string{
		"breaks_at: 300":     "disc.yaml:7:102: views[0].stages[0].breaks_at: got 300, want 1 to 255",
		"breaks_att: 3":      `disc.yaml:7:91: views[0].stages[0]: unknown key "breaks_att" (did you mean "breaks_at"?)`,
		"breaks_at: soon":    "disc.yaml:7:102: views[0].stages[0].breaks_at: got soon, want a whole number",
		"breaks_at: 3":       "",
		"breaks_at: 3, a: 1": `unknown key "a"`,
	} {
		text := strings.Replace(processRecipe, "{type: region}", "{type: brittle, "+settings+"}, {type: region}", 1)
		if err := os.WriteFile(recipe, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
		code, out, errOut := runVerb(t, "validate", recipe, "--plugins", plugins)
		if want == "" && code != 0 || !strings.Contains(out, want) {
			t.Errorf("%s: exit %d, got %s%s\nwant %q", settings, code, out, errOut, want)
		}
	}
}

func TestTryWritesPictures(t *testing.T) {
	dir := t.TempDir()
	frame := filepath.Join(dir, "frame.pgm")
	if err := files.Write(frame, dotFrame(0)); err != nil {
		t.Fatal(err)
	}
	code, out, errOut := runVerb(t, "stages", "try", "darkfield", frame, "--with", "grid_px=32", "--dir", dir, "--json")
	var doc struct{ Files []string }
	if err := json.Unmarshal([]byte(out), &doc); code != 0 || err != nil {
		t.Fatalf("%d %v\n%s", code, err, errOut)
	}
	seen := map[string]bool{}
	for _, file := range doc.Files {
		f, err := os.Open(file)
		if err != nil {
			t.Fatal(err)
		}
		if img, err := png.Decode(f); err != nil || img.Bounds().Dx() != 8*64 {
			t.Errorf("%s: %v", file, err)
		}
		f.Close()
		seen[filepath.Base(file)] = true
	}
	for _, want := range []string{"snr.png", "noise.png", "background.png", "overlay.png"} {
		if !seen[want] {
			t.Errorf("no %s in %v", want, doc.Files)
		}
	}
	if code, _, errOut := runVerb(t, "stages", "try", "darkfield", frame, "--with", "grid_px=lots", "--dir", dir); code != 2 || !strings.Contains(errOut, "--with: grid_px: got lots, want a whole number") {
		t.Errorf("exit %d: %s", code, errOut)
	}
}

func TestVerify(t *testing.T) {
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	code, out, errOut := runVerb(t, "stages", "verify", self, "--arg", "serve-brittle", "--json")
	var doc struct {
		Stage    string
		Verdicts []struct {
			Property string
			Pass     bool
			Findings []string
		}
	}
	if err := json.Unmarshal([]byte(out), &doc); err != nil || doc.Stage != "brittle" {
		t.Fatalf("%v\n%s%s", err, out, errOut)
	}
	failed := map[string]string{}
	for _, v := range doc.Verdicts {
		if !v.Pass {
			failed[v.Property] = fmt.Sprint(v.Findings)
		}
	}
	// Two of the odd frames start with the byte 255: there the stage breaks, and nowhere else.
	if code != 1 || len(failed) != 2 || !strings.Contains(failed["odd frames"], "the brittle stage broke") || !strings.Contains(failed["survived"], " restarts: ") {
		t.Errorf("exit %d, failed %v\n%s", code, failed, errOut)
	}
	if code, _, errOut := runVerb(t, "stages", "verify", "/bin/ls"); code != 1 || !strings.Contains(errOut, "stdout belongs to the handshake") {
		t.Errorf("exit %d: %s", code, errOut)
	}
}

// The demo recipes of the stages that ship as plug-ins find what their frames show.
func TestDemoRecipesOfPlugins(t *testing.T) {
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	const demo = "../../plugins/outside/demo/"
	fringes := []string{}
	for i := range 16 {
		fringes = append(fringes, fmt.Sprintf("fringes=%sfringes_%02d.png", demo, i))
	}
	own := filepath.Join(t.TempDir(), "plugins.yaml")
	text := fmt.Sprintf("format: 1\nplugins:\n  - {name: unwrap, path: %q, args: [serve-unwrap]}\n  - {name: deflectometry, path: %q, args: [serve-deflectometry]}\n", self, self)
	if err := os.WriteFile(own, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	for recipe, c := range map[string]struct {
		plugins, reason string
		frames          []string
	}{
		"unwrap":  {own, "dig too large", []string{"ring=" + demo + "unwrap.png"}},
		"fringes": {own, "dent too steep", fringes},
		"texture": {demo + "plugins.yaml", "orange peel", []string{"ring=" + demo + "texture.png"}},
	} {
		t.Run(recipe, func(t *testing.T) {
			if recipe == "texture" && exec.Command("/usr/bin/python3", "-c", "import grpc, numpy, google.protobuf").Run() != nil {
				t.Skip("python3-grpcio, python3-protobuf or python3-numpy is missing")
			}
			args := append([]string{"inspect", "--recipe", demo + recipe + ".yaml", "--plugins", c.plugins, "--json"}, c.frames...)
			code, out, errOut := runVerb(t, args...)
			var doc struct{ Verdict string }
			if err := json.Unmarshal([]byte(out), &doc); code != 0 || err != nil || doc.Verdict != "reject" || !strings.Contains(out, c.reason) {
				t.Errorf("exit %d, %v, got %s, want a reject for %q\n%s", code, err, doc.Verdict, c.reason, errOut)
			}
		})
	}
}

// A server whose plug-in does not start goes on: it says so wherever it is asked, holds the
// units that need the stage with the cause, and judges them once the program is mended.
func TestStageThatStartsLaterAtTheLine(t *testing.T) {
	s := newSite(t, 0)
	s.write("recipes/disc.yaml", strings.Replace(processRecipe, "{type: region}", "{type: brittle, breaks_at: 254}, {type: region}", 1))
	raw := dotFrame(1)
	raw.Data[0] = 1
	s.check(files.Write(s.path("frames/u00001_ring.pgm"), raw))
	s.write("plugins.yaml", "format: 1\nplugins:\n  - {name: brittle, path: stage.sh, backoff_ms: 50}\n")
	code, out, errOut := runVerb(t, "stages", "brittle", "--plugins", s.path("plugins.yaml"))
	if code != 0 || !strings.Contains(out, "brittle (runs "+s.path("stage.sh")+") IS DOWN") || !strings.Contains(out, "no such file") {
		t.Errorf("stages: exit %d, %s%s", code, out, errOut)
	}
	code, out, errOut = runVerb(t, "validate", s.path("recipes/disc.yaml"), "--plugins", s.path("plugins.yaml"))
	if code != 1 || !strings.Contains(errOut, "the settings of stage brittle are not checked: it is down") {
		t.Errorf("validate: exit %d, %s%s", code, out, errOut)
	}
	s.flags = []string{"--plugins", s.path("plugins.yaml")}
	s.serve()
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	s.check(s.feedCommand(ctx, "first.jsonl").Run())
	if v := s.answered("first.jsonl"); len(v) != 1 || v[0]["verdict"] != "hold" || !strings.Contains(fmt.Sprint(v[0]), "the stage is down: it has not started yet") {
		t.Errorf("verdicts %v, want a hold that names the cause", v)
	}
	stations := func() string {
		out, err := exec.Command(filepath.Join(s.bin, "lapgate"), "stations", "--server", s.address).CombinedOutput()
		if err != nil {
			t.Fatalf("%v\n%s", err, out)
		}
		return string(out)
	}
	if text := stations(); !strings.Contains(text, "stage brittle is down (") || !strings.Contains(text, "no such file") {
		t.Errorf("stations:\n%s", text)
	}
	if h := s.health("stage.brittle"); h != healthpb.HealthCheckResponse_NOT_SERVING {
		t.Errorf("health %v", h)
	}
	self, err := os.Executable()
	s.check(err)
	s.check(os.WriteFile(s.path("stage.sh"), []byte(fmt.Sprintf("#!/bin/sh\nexec %q serve-brittle\n", self)), 0o755))
	for range 100 {
		if !strings.Contains(stations(), "stage brittle is down") {
			break
		}
		time.Sleep(50 * time.Millisecond)
	}
	if h := s.health("stage.brittle"); h != healthpb.HealthCheckResponse_SERVING {
		t.Errorf("health %v", h)
	}
	s.check(s.feedCommand(ctx, "second.jsonl", "--attempt", "2").Run())
	if v := s.answered("second.jsonl"); len(v) != 1 || v[0]["verdict"] != "accept" {
		t.Errorf("verdicts %v, want an accept once the stage is up", v)
	}
}
