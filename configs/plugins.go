package configs

import (
	"fmt"
	"os"
	"path/filepath"
	"regexp"
)

// Plugin is how a stage outside is launched and watched, as plugins.yaml says it. 0 is
// the default everywhere but in RestartBudget.
type Plugin struct {
	Name           string            // for messages; it cannot be empty
	Path           string            // of the program; relative to the file that names it
	Args           []string          // for it
	Env            map[string]string // beside PATH, HOME, LANG and TMPDIR, which are all it gets
	DeadlineMS     int               // for one call; then the process is killed and the unit held. 0 = 5000
	MaxConcurrent  int               // calls at once. 0 = 2
	MaxRSSMB       int               `yaml:"max_rss_mb"` // resident memory of the process and its children. 0 = 1024
	RestartBudget  *int              // restarts within the window; one more and the stage is down. Not given = 5
	RestartWindowS int               // 0 = 600
	CoolDownS      int               // after which a stage that is down is tried again. 0 = 600
	BackoffMS      int               // before the second restart in a row; doubles from there. 0 = 100
	StartTimeoutMS int               // from launch to handshake. 0 = 10000
	SlotMB         int               // shared memory for what one call reads, and as much for what it writes. 0 = 512
	Pixels         string            // shared (also when empty) or bytes
	MinRegionShare float64           // of the frame, for a region where there was none before. 0 = 0.01
}

type pluginsFile struct {
	Plugins []Plugin // at least one
}

var pluginName = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9._-]{0,63}$`)

// LoadPlugins reads the list of stages outside; an empty path is an empty list. Paths in
// it come back relative to where the program runs. The error is Problems where the
// content is to blame.
func LoadPlugins(path string) ([]Plugin, error) {
	if path == "" {
		return nil, nil
	}
	text, err := readFile(path)
	if err != nil {
		return nil, err
	}
	written, src, problems := decodeAll(path, text, pluginsFile{})
	if problems == nil {
		problems = checkPlugins(written, src)
	}
	if err := problems.err(); err != nil {
		return nil, err
	}
	for i, p := range written.Plugins {
		if !filepath.IsAbs(p.Path) {
			written.Plugins[i].Path = filepath.Join(filepath.Dir(path), p.Path)
		}
	}
	return written.Plugins, nil
}

func checkPlugins(w pluginsFile, src Source) Problems {
	var out Problems
	wrong := func(bad bool, path, found, want string) {
		if bad {
			out = append(out, src.Problem(path, found, want))
		}
	}
	wrong(len(w.Plugins) == 0, "plugins", "no plug-in is listed", "at least one")
	names := map[string]bool{}
	for i, p := range w.Plugins {
		at := index("plugins", i)
		wrong(!pluginName.MatchString(p.Name), at+".name", fmt.Sprintf("got %q", p.Name), "1 to 64 characters of A-Z a-z 0-9 . _ -, no mark first")
		wrong(names[p.Name], at+".name", fmt.Sprintf("%q names an earlier plug-in too", p.Name), "a name of its own for every plug-in")
		names[p.Name] = true
		wrong(p.Path == "", at+".path", "the key is missing", "the program of the stage")
		wrong(p.Pixels != "" && p.Pixels != "shared" && p.Pixels != "bytes", at+".pixels", fmt.Sprintf("got %q", p.Pixels), "shared or bytes")
		wrong(!(p.MinRegionShare >= 0 && p.MinRegionShare <= 1), at+".min_region_share", fmt.Sprintf("got %g", p.MinRegionShare), "0 to 1; 0 = 0.01")
		wrong(p.RestartBudget != nil && (*p.RestartBudget < 0 || *p.RestartBudget > 1e6), at+".restart_budget", "out of range", "0 (never again) to 1000000")
		for _, n := range []struct {
			key         string
			value, most int
		}{
			{"deadline_ms", p.DeadlineMS, 3_600_000}, {"max_concurrent", p.MaxConcurrent, 64}, {"max_rss_mb", p.MaxRSSMB, 1 << 20},
			{"restart_window_s", p.RestartWindowS, 86_400}, {"cool_down_s", p.CoolDownS, 86_400}, {"backoff_ms", p.BackoffMS, 60_000}, {"start_timeout_ms", p.StartTimeoutMS, 600_000}, {"slot_mb", p.SlotMB, 1 << 16},
		} {
			wrong(n.value < 0 || n.value > n.most, at+"."+n.key, fmt.Sprintf("got %d", n.value), fmt.Sprintf("0 to %d; 0 = the default", n.most))
		}
	}
	return out
}

// validatePlugins looks at a list and at whether its programs are there.
func validatePlugins(path string) Problems {
	plugins, err := LoadPlugins(path)
	if err != nil {
		return asProblems(path, err)
	}
	text, _ := readFile(path)
	src, _ := parse(path, text)
	var out Problems
	for i, p := range plugins {
		if _, err := os.Stat(p.Path); err != nil {
			out = append(out, src.Problem(index("plugins", i)+".path", err.Error(), "a program that is there"))
		}
	}
	return out
}
