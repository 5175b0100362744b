package configs

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func pluginsText(t *testing.T, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "plugins.yaml")
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestLoadPlugins(t *testing.T) {
	path := pluginsText(t, "format: 1\nplugins:\n  - {name: texture, path: stages/texture.py, args: [--fast], env: {OMP_NUM_THREADS: \"1\"}, deadline_ms: 800, max_rss_mb: 300, restart_budget: 0, pixels: bytes}\n"+
		"  - {name: unwrap, path: /opt/unwrap}\n")
	got, err := LoadPlugins(path)
	if err != nil {
		t.Fatal(err)
	}
	p := got[0]
	if len(got) != 2 || p.Path != filepath.Join(filepath.Dir(path), "stages/texture.py") || p.DeadlineMS != 800 || p.MaxRSSMB != 300 || *p.RestartBudget != 0 ||
		p.Env["OMP_NUM_THREADS"] != "1" || p.Args[0] != "--fast" || p.Pixels != "bytes" || got[1].Path != "/opt/unwrap" || got[1].RestartBudget != nil {
		t.Errorf("got %+v", got)
	}
	if none, err := LoadPlugins(""); none != nil || err != nil {
		t.Errorf("got %v, %v", none, err)
	}
}

func TestFaultyPlugins(t *testing.T) {
	for text, want := range map[string]string{
		"format: 1\nplugins: []\n":                                              "plugins.yaml:2:10: plugins: no plug-in is listed",
		"format: 1\nplugins:\n  - {path: a}\n":                                  `plugins[0].name: got ""`,
		"format: 1\nplugins:\n  - {name: a}\n":                                  "plugins[0].path: the key is missing",
		"format: 1\nplugins:\n  - {name: a, path: b}\n  - {name: a, path: c}\n": `:4:12: plugins[1].name: "a" names an earlier plug-in too`,
		"format: 1\nplugins:\n  - {name: a, path: b, deadline_ms: -1}\n":        ":3:37: plugins[0].deadline_ms: got -1, want 0 to 3600000",
		"format: 1\nplugins:\n  - {name: a, path: b, pixels: memory}\n":         `plugins[0].pixels: got "memory", want shared or bytes`,
		"format: 1\nplugins:\n  - {name: a, path: b, min_region_share: 2}\n":    "plugins[0].min_region_share: got 2",
		"format: 1\nplugins:\n  - {name: a, path: b, restart_budget: -2}\n":     "plugins[0].restart_budget: out of range",
		"format: 1\nplugins:\n  - {name: a, path: b, deadlin_ms: 3}\n":          `unknown key "deadlin_ms" (did you mean "deadline_ms"?)`,
	} {
		_, err := LoadPlugins(pluginsText(t, text))
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q", err, want)
		}
	}
	if p := validatePlugins(pluginsText(t, "format: 1\nplugins:\n  - {name: a, path: nowhere}\n")); len(p) != 1 || p[0].Path != "plugins[0].path" || p[0].Line != 3 {
		t.Errorf("got %v", p)
	}
}
