package calibrate

import (
	"bytes"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"lapgate/pipeline/raster/files"
)

// writeFrames puts frames into a folder as files and returns it.
func writeFrames(t *testing.T, frames []Frame) string {
	t.Helper()
	dir := t.TempDir()
	for _, f := range frames {
		if err := files.Write(filepath.Join(dir, f.Name), f.Raw); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

func madeFromFolders(t *testing.T) Made {
	t.Helper()
	s := goodSet()
	m, err := FromFolders(s.req, Folders{Dark: writeFrames(t, s.dark), Stray: writeFrames(t, s.stray), Response: writeFrames(t, s.response)}, files.Options{})
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func written(t *testing.T) (string, Made) {
	t.Helper()
	m := madeFromFolders(t)
	dir := filepath.Join(t.TempDir(), "ring")
	if err := Write(dir, m); err != nil {
		t.Fatal(err)
	}
	return dir, m
}

func TestFoldersGiveWhatFramesGive(t *testing.T) {
	s := goodSet()
	want, err := Make(s.req, Inputs{Dark: Frames(s.dark...), Stray: Frames(s.stray...), Response: Frames(s.response...)})
	if err != nil {
		t.Fatal(err)
	}
	if got := madeFromFolders(t); got.Calibration.Hash != want.Calibration.Hash || !reflect.DeepEqual(got, want) {
		t.Errorf("hash %s from folders, %s from frames", got.Calibration.Hash, want.Calibration.Hash)
	}
}

func TestFolderRoundTrip(t *testing.T) {
	dir, want := written(t)
	got, err := LoadMade(dir)
	if err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("got %+v, want %+v", got.Provenance, want.Provenance)
	}
	for _, name := range []string{"dark.png", "stray.png", "response.png", "bad_pixels.png"} {
		if r, err := files.Read(filepath.Join(dir, name), files.Options{}); err != nil || r.Width != 128 {
			t.Errorf("%s: %d wide, %v", name, r.Width, err)
		}
	}
	again := filepath.Join(t.TempDir(), "again")
	if err := Write(again, got); err != nil {
		t.Fatal(err)
	}
	a, _ := os.ReadFile(filepath.Join(dir, documentName))
	b, _ := os.ReadFile(filepath.Join(again, documentName))
	if !bytes.Equal(a, b) {
		t.Error("the same calibration gave another document")
	}
}

func TestWriteNeverWritesOver(t *testing.T) {
	dir, m := written(t)
	if err := Write(dir, m); err == nil || !strings.Contains(err.Error(), "exists, want a new folder") {
		t.Errorf("got %v", err)
	}
	entries, _ := os.ReadDir(filepath.Dir(dir))
	if len(entries) != 1 {
		t.Errorf("left behind: %v", entries)
	}
}

func TestWriteRefusesChangedCalibration(t *testing.T) {
	m := madeFromFolders(t)
	m.Calibration.Dark.Pix[0]++
	if err := Write(filepath.Join(t.TempDir(), "x"), m); err == nil || !strings.Contains(err.Error(), "changed after it was made") {
		t.Errorf("got %v", err)
	}
}

func TestTamperedFolderIsRefused(t *testing.T) {
	replace := func(old, with string) func([]byte) []byte {
		return func(b []byte) []byte { return bytes.Replace(b, []byte(old), []byte(with), 1) }
	}
	for _, c := range []struct {
		name, file, want string
		change           func([]byte) []byte
	}{
		{"scale", documentName, "hash: got sha256:", replace(`"um_per_px": 10,`, `"um_per_px": 11,`)},
		{"one bit of dark", "dark.f32", "dark.f32: sha256: got", func(b []byte) []byte { b[100] ^= 1; return b }},
		{"short response", "response.f32", "response.f32: got 49148 bytes, want 49152", func(b []byte) []byte { return b[:len(b)-4] }},
		{"newer format", documentName, "format: got 2, want 1", replace(`"format": 1`, `"format": 2`)},
		{"unknown key", documentName, `unknown field "extra"`, replace(`"format": 1,`, `"format": 1, "extra": 2,`)},
		{"cut", documentName, "unexpected end of JSON", func(b []byte) []byte { return b[:len(b)/2] }},
	} {
		dir, _ := written(t)
		path := filepath.Join(dir, c.file)
		text, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, c.change(text), 0o600); err != nil {
			t.Fatal(err)
		}
		if _, err := Load(dir); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: got %v, want ...%s...", c.name, err, c.want)
		}
	}
}

func TestLoadNamesMissingFile(t *testing.T) {
	dir, _ := written(t)
	if err := os.Remove(filepath.Join(dir, "stray.f32")); err != nil {
		t.Fatal(err)
	}
	if _, err := Load(dir); err == nil || !strings.Contains(err.Error(), "stray.f32") {
		t.Errorf("got %v", err)
	}
}

func TestFolderCaptureMustAgree(t *testing.T) {
	s := goodSet()
	dark, response := writeFrames(t, s.dark), writeFrames(t, s.response)
	note := filepath.Join(response, "capture.json")
	for text, want := range map[string]string{
		`{"exposure_us": 1000, "gain_db": 6}`: "",
		`{"exposure_us": 250}`:                "exposure_us: got 250, want 1000",
		`{"exposure": 250}`:                   `unknown field "exposure"`,
	} {
		if err := os.WriteFile(note, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		_, err := FromFolders(s.req, Folders{Dark: dark, Response: response}, files.Options{})
		if (err == nil) != (want == "") || err != nil && !strings.Contains(err.Error(), want) {
			t.Errorf("%s: got %v, want ...%s...", text, err, want)
		}
	}
}

func TestFolderRefusesWhatIsNoFrame(t *testing.T) {
	s := goodSet()
	dir := writeFrames(t, s.dark)
	if err := os.WriteFile(filepath.Join(dir, "notes.txt"), []byte("lamp off"), 0o600); err != nil {
		t.Fatal(err)
	}
	_, err := FromFolders(s.req, Folders{Dark: dir}, files.Options{})
	if err == nil || !strings.Contains(err.Error(), "notes.txt: content: starts with") {
		t.Errorf("got %v", err)
	}
	_, err = FromFolders(s.req, Folders{Dark: filepath.Join(dir, "missing")}, files.Options{})
	if err == nil || !strings.Contains(err.Error(), "missing") {
		t.Errorf("got %v", err)
	}
}
