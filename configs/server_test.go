package configs

import (
	"bytes"
	"errors"
	"flag"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/spf13/pflag"
)

var update = flag.Bool("update", false, "rewrite the files that tests compare with")

func TestDefaultServerFile(t *testing.T) {
	want := serverFile(DefaultServer())
	if *update {
		if err := os.WriteFile("server.yaml", want, 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	if !bytes.Equal(DefaultServerFile, want) {
		t.Errorf("server.yaml is not the defaults with their comments; run the test with -update\n%s", want)
	}
	got, _, err := Decode("server.yaml", DefaultServerFile, Server{})
	if err != nil || got != DefaultServer() {
		t.Errorf("read back: got %+v, %v", got, err)
	}
}

// Every setting says what zero or empty does, or that it cannot be.
func TestHelpSaysWhatZeroDoes(t *testing.T) {
	flags := pflag.NewFlagSet("x", pflag.ContinueOnError)
	ServerFlags(flags)
	flags.VisitAll(func(f *pflag.Flag) {
		says := false
		for _, form := range []string{"cannot be empty", "cannot be 0", "0 =", "false =", "Empty keeps"} {
			says = says || strings.Contains(f.Usage, form)
		}
		if !says {
			t.Errorf("--%s: %q does not say what zero does", f.Name, f.Usage)
		}
	})
}

// settingsFile writes a settings file and returns its path.
func settingsFile(t *testing.T, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "server.yaml")
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

func given(t *testing.T, args ...string) *pflag.FlagSet {
	t.Helper()
	flags := pflag.NewFlagSet("x", pflag.ContinueOnError)
	ServerFlags(flags)
	if err := flags.Parse(args); err != nil {
		t.Fatal(err)
	}
	return flags
}

func TestServerWithoutAnything(t *testing.T) {
	for _, path := range []string{"", settingsFile(t, "format: 1\n")} {
		if got, err := LoadServer(path, given(t)); err != nil || got != DefaultServer() {
			t.Errorf("%q: got %+v, %v; want the defaults", path, got, err)
		}
	}
}

func TestFlagsWinOverEnvironmentOverFile(t *testing.T) {
	path := settingsFile(t, "format: 1\nworkers: 2\nview_timeout_ms: 20\nlog_level: warn\nreflection: false\nmax_frame_bytes: 5_000\n")
	t.Setenv("LAPGATE_VIEW_TIMEOUT_MS", "30")
	t.Setenv("LAPGATE_LOG_LEVEL", "error")
	t.Setenv("LAPGATE_DEVELOPMENT", "true")
	t.Setenv("LAPGATE_MAX_BYTES_IN_FLIGHT", "9000000000")
	t.Setenv("LAPGATE_IMAGES", "") // as if it were not set
	t.Setenv("LAPGATE_COLOUR", "red")
	got, err := LoadServer(path, given(t, "--log-level", "debug", "--listen=:0"))
	want := DefaultServer()
	want.Workers, want.ViewTimeoutMS, want.LogLevel, want.Listen = 2, 30, "debug", ":0"
	want.Development, want.Reflection, want.MaxBytesInFlight, want.MaxFrameBytes = true, false, 9_000_000_000, 5000
	if err != nil || got != want {
		t.Errorf("got %+v, %v\nwant %+v", got, err, want)
	}
}

func TestServerProblems(t *testing.T) {
	for _, c := range []struct {
		text, env string
		args      []string
		is        string
	}{
		{"format: 1\nlisen: x\n", "", nil, `FILE:2:1: unknown key "lisen" (did you mean "listen"?), want one of listen, `},
		{"format: 1\nworkers: 2.9\n", "", nil, "FILE:2:10: workers: got 2.9, want a whole number"},
		{"format: 1\nworkers: \"2\"\n", "", nil, "FILE:2:10: workers: got the text \"2\", want a whole number"},
		{"format: 1\nlisten:\n", "", nil, "FILE:2:9: listen: no value is given"},
		{"format: 1\nworkers: -1\n", "", nil, "FILE:2:10: workers: got -1, want 0 to 1024"},
		{"format: 1\nlisten: nowhere\n", "", nil, `FILE:2:9: listen: got "nowhere", want host:port`},
		{"format: 1\nmax_bytes_in_flight: 1000\n", "", nil, "FILE:2:22: max_bytes_in_flight: got 1000, want max_frame_bytes (134217728) or more"},
		{"format: 1\n", "LAPGATE_WORKERS=many", nil, `LAPGATE_WORKERS: workers: got "many", want a whole number`},
		{"format: 1\n", "LAPGATE_REFLECTION=maybe", nil, `LAPGATE_REFLECTION: reflection: got "maybe", want true or false`},
		{"format: 1\n", "LAPGATE_WORKERS=-3", nil, "LAPGATE_WORKERS: workers: got -3, want 0 to 1024"},
		{"format: 1\n", "LAPGATE_LISTN=:0", nil, "LAPGATE_LISTN: no setting has this variable, want LAPGATE_LISTEN"},
		{"format: 1\n", "", []string{"--log-level=loud"}, `--log-level: log_level: got "loud", want one of debug, info, warn, error`},
		{"format: 1\nlog_format: xml\n", "", nil, `FILE:2:13: log_format: got "xml", want one of json, text`},
		{"format: 1\nlog_level: soft\n", "", nil, `FILE:2:12: log_level: got "soft", want one of debug, info, warn, error`},
	} {
		path := settingsFile(t, c.text)
		name, value, _ := strings.Cut(c.env, "=")
		if name != "" {
			t.Setenv(name, value)
		}
		_, err := LoadServer(path, given(t, c.args...))
		var all Problems
		want := strings.Replace(c.is, "FILE", path, 1)
		if !errors.As(err, &all) || len(all) != 1 || !strings.HasPrefix(err.Error(), want) {
			t.Errorf("%q %s %v:\ngot  %v\nwant %s", c.text, c.env, c.args, err, want)
		}
		if name != "" {
			os.Unsetenv(name)
		}
	}
}

func TestMissingSettingsFile(t *testing.T) {
	if _, err := LoadServer(filepath.Join(t.TempDir(), "none.yaml"), nil); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("got %v", err)
	}
}
