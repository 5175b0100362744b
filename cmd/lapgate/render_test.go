package main

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster/files"
	"lapgate/pipeline/render"
)

// smallScene is the demo scene with a small, coarse camera and few frames.
func smallScene(t *testing.T) render.Scene {
	t.Helper()
	s, err := loadScene(filepath.Join("..", "..", "configs", "demo", "scene.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	s.Camera.Width, s.Camera.Height, s.Camera.UMPerPx = 320, 240, 117.5
	s.Reference = render.Reference{XPx: 4, YPx: 4, WidthPx: 16, HeightPx: 16}
	s.Units, s.UnitsPerLot, s.Calibration = 6, 2, render.CalibrationFrames{Dark: 2, Stray: 1, Response: 2}
	return s
}

// digest returns a hash for every file below a folder.
func digest(t *testing.T, dir string) map[string]string {
	t.Helper()
	out := map[string]string{}
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		text, err := os.ReadFile(path)
		name, _ := filepath.Rel(dir, path)
		out[filepath.ToSlash(name)] = fmt.Sprintf("%x", sha256.Sum256(text))
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func TestRenderIsTheSameWithAnyNumberOfWorkers(t *testing.T) {
	s := smallScene(t)
	var runs []map[string]string
	for _, workers := range []int{1, 4} {
		out := t.TempDir()
		sum, err := renderJob{out: out, workers: workers}.run(context.Background(), s, &bytes.Buffer{})
		if err != nil {
			t.Fatal(err)
		}
		if sum.Units != 6 || sum.Frames != 18 || sum.CalibrationFrames != 15 {
			t.Errorf("got %+v", sum)
		}
		runs = append(runs, digest(t, out))
	}
	if len(runs[0]) != 2*(18+15)+1 {
		t.Errorf("got %d files, want 67", len(runs[0]))
	}
	for name, hash := range runs[0] {
		if runs[1][name] != hash {
			t.Errorf("%s differs between 1 and 4 workers", name)
		}
	}
}

func TestRenderedFramesMatchTheirHeadersAndTruth(t *testing.T) {
	out := t.TempDir()
	if _, err := (renderJob{out: out, workers: 2, units: 3}).run(context.Background(), smallScene(t), &bytes.Buffer{}); err != nil {
		t.Fatal(err)
	}
	text, err := os.ReadFile(filepath.Join(out, "truth.jsonl"))
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(strings.TrimSpace(string(text)), "\n")
	if len(lines) != 3 {
		t.Fatalf("got %d lines of truth, want 3", len(lines))
	}
	for _, line := range lines {
		var truth render.Truth
		if err := json.Unmarshal([]byte(line), &truth); err != nil {
			t.Fatal(err)
		}
		for _, v := range truth.Views {
			base := filepath.Join(out, "frames", truth.Line, truth.Unit+"_"+v.Name)
			head, err := os.ReadFile(base + ".json")
			if err != nil {
				t.Fatal(err)
			}
			var h pipeline.FrameHeader
			if err := json.Unmarshal(head, &h); err != nil {
				t.Fatal(err)
			}
			raw, err := files.Read(base+".pgm", files.Options{})
			if err != nil {
				t.Fatal(err)
			}
			if _, err := pipeline.NewFrame(h, raw.Data); err != nil {
				t.Error(err)
			}
			if h.Identity != truth.Identity {
				t.Errorf("got %+v in the header, %+v in the truth", h.Identity, truth.Identity)
			}
		}
	}
}

func TestRenderRefusesFolderWithFrames(t *testing.T) {
	out := t.TempDir()
	job := renderJob{out: out, workers: 1, units: 1}
	if _, err := job.run(context.Background(), smallScene(t), &bytes.Buffer{}); err != nil {
		t.Fatal(err)
	}
	_, err := job.run(context.Background(), smallScene(t), &bytes.Buffer{})
	if pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("got %v, want a refusal", err)
	}
}

// edited writes a copy of a scene file with one text in it replaced.
func edited(t *testing.T, name, from, to string) string {
	t.Helper()
	text, err := os.ReadFile(filepath.Join("..", "..", filepath.FromSlash(name)))
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Contains(text, []byte(from)) {
		t.Fatalf("%s has no %q", name, from)
	}
	path := filepath.Join(t.TempDir(), "scene.yaml")
	if err := os.WriteFile(path, bytes.Replace(text, []byte(from), []byte(to), 1), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestRenderCommandPrintsJSON(t *testing.T) {
	scene := edited(t, "testdata/scenes/spoilers.yaml", "{dark: 4, stray: 4, response: 4}", "{dark: 1, stray: 0, response: 1}")
	cmd, stdout := renderCommand(), &bytes.Buffer{}
	cmd.SetOut(stdout)
	cmd.SetArgs([]string{"--scene", scene, "--out", t.TempDir(), "--units", "1", "--json"})
	if err := cmd.Execute(); err != nil {
		t.Fatal(err)
	}
	var got renderSummary
	if err := json.Unmarshal(stdout.Bytes(), &got); err != nil || got.Units != 1 || got.Frames != 3 || got.CalibrationFrames != 6 {
		t.Errorf("got %s, %v", stdout, err)
	}
}

func TestLoadSceneSaysWhere(t *testing.T) {
	cases := []struct{ from, to, want string }{
		{"  blur_px: 0.7", "  blur_px: 90", `scene\.yaml:\d+:12: camera\.blur_px: got 90, want 0 to 50`},
		{"scratch_width_um: 60", "scratch_with_um: 60", `scene\.yaml:\d+:3: .*unknown key "scratch_with_um"`},
	}
	for _, c := range cases {
		_, err := loadScene(edited(t, "configs/demo/scene.yaml", c.from, c.to))
		if err == nil || !regexp.MustCompile(c.want).MatchString(err.Error()) || pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("got %v, want an invalid-input error like %s", err, c.want)
		}
	}
}
