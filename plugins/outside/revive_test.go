package outside

import (
	"context"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
)

// script is a program that serves one of the stages of this test program.
func script(t *testing.T, path string, args ...string) {
	t.Helper()
	text := fmt.Sprintf("#!/bin/sh\nexec %q serve", os.Args[0])
	for _, a := range args {
		text += fmt.Sprintf(" %q", a)
	}
	next := path + ".next"
	if err := os.WriteFile(next, []byte(text+"\n"), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.Rename(next, path); err != nil {
		t.Fatal(err)
	}
}

func openLater(t *testing.T, s Settings) *Host {
	t.Helper()
	h, err := OpenLater(context.Background(), s, slog.New(slog.NewTextHandler(io.Discard, nil)))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { h.Close() })
	return h
}

// A stage whose program does not start is down and holds, and whatever names it can be
// built; once the program is there it starts, and what is built then runs it.
func TestStageThatStartsLater(t *testing.T) {
	t.Parallel()
	s := settingsFor("probe")
	s.Path, s.Args, s.Backoff = filepath.Join(t.TempDir(), "stage"), nil, 20*time.Millisecond
	h := openLater(t, s)
	if st := h.Status(); st.State != Down || st.Type != "probe" || !strings.Contains(st.LastError, "it has not started yet") || !strings.Contains(st.LastError, "no such file") {
		t.Errorf("got %+v", st)
	}
	early := line(t, h.Factory())
	j := inspectTiny(t, early, 1)
	if j.Verdict != pipeline.Hold || !strings.Contains(j.Reasons[0].Text, "stage probe: plug-in probe: the stage is down: it has not started yet") || !strings.Contains(j.Reasons[0].Text, "no such file") {
		t.Errorf("got %s %+v", j.Verdict, j.Reasons)
	}
	if h.Revision() != 0 {
		t.Errorf("revision %d before the start", h.Revision())
	}
	script(t, s.Path, "probe")
	eventually(t, "the stage is up", func() bool { return h.Status().State == Up })
	if j := inspectTiny(t, early, 1); j.Verdict != pipeline.Hold || !strings.Contains(j.Reasons[0].Text, "has just started; show the unit again") {
		t.Errorf("got %s %+v", j.Verdict, j.Reasons)
	}
	if j := inspectTiny(t, line(t, h.Factory()), 1); j.Verdict != pipeline.Accept || h.Revision() != 1 {
		t.Errorf("got %s %+v, revision %d", j.Verdict, j.Reasons, h.Revision())
	}
	_, _, err := h.unknownFactory().New(decodeText(`{"factor":-1}`), pipeline.Environment{})
	if err != nil {
		t.Errorf("settings that nobody could check: %v", err)
	}
}

// Settings that nobody could check are told when the stage has started.
func TestSettingsOfAStageThatStartsLater(t *testing.T) {
	h := open(t, settingsFor("probe"))
	for settings, want := range map[string]string{`{"factor":-1}`: "factor: got -1, want above 0", `{"facter":1}`: "facter: there is no such setting"} {
		stage, _, _ := h.unknownFactory().New(decodeText(settings), pipeline.Environment{})
		if err := stage.Run(context.Background(), tiny(1)); err == nil || !strings.Contains(err.Error(), "plug-in probe has started, and the recipe does not fit it: "+want) {
			t.Errorf("%s: got %v", settings, err)
		}
	}
}

func (h *Host) unknownFactory() pipeline.Factory {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.unknown()
}

// A program that turns out to be another stage than it was listed as is not taken.
func TestStageThatIsAnotherLater(t *testing.T) {
	t.Parallel()
	s := settingsFor("sums")
	s.Path, s.Args, s.Backoff = filepath.Join(t.TempDir(), "stage"), nil, 20*time.Millisecond
	h := openLater(t, s)
	script(t, s.Path, "probe")
	eventually(t, "it says why", func() bool {
		return strings.Contains(h.Status().LastError, "it is the stage probe, but was listed as sums")
	})
}

// A stage that is down because its budget is spent comes back after the cool-down, with
// its whole budget.
func TestCoolDown(t *testing.T) {
	t.Parallel()
	s := settingsFor("hostile", "panic")
	s.RestartBudget, s.Backoff, s.CoolDown = 1, time.Millisecond, 400*time.Millisecond
	h := open(t, s)
	p := line(t, h.Factory())
	for range 2 {
		for range 2 {
			if j := inspectTiny(t, p, 49); j.Verdict != pipeline.Hold {
				t.Errorf("got %s", j.Verdict)
			}
		}
		eventually(t, "the stage is down", func() bool { return h.Status().State == Down })
		eventually(t, "the stage is up again", func() bool { return h.Status().State == Up })
		if j := inspectTiny(t, p, 1); j.Verdict != pipeline.Accept {
			t.Errorf("got %s %+v", j.Verdict, j.Reasons)
		}
	}
}

// A mended program is taken as soon as it is there, in another version too; what was built
// for the one before asks to be built anew.
func TestMendedProgram(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	s := settingsFor("probe")
	s.Path, s.Args, s.RestartBudget = filepath.Join(dir, "stage"), nil, 0
	script(t, s.Path, "hostile", "panic")
	h := open(t, s)
	old := line(t, h.Factory())
	if j := inspectTiny(t, old, 49); j.Verdict != pipeline.Hold {
		t.Errorf("got %s", j.Verdict)
	}
	eventually(t, "the stage is down", func() bool { return h.Status().State == Down })
	script(t, s.Path, "probe")
	eventually(t, "the stage is up again", func() bool { return h.Status().State == Up })
	if j := inspectTiny(t, old, 1); j.Verdict != pipeline.Hold || !strings.Contains(j.Reasons[0].Text, "its program has changed") {
		t.Errorf("got %s %+v", j.Verdict, j.Reasons)
	}
	if j := inspectTiny(t, line(t, h.Factory()), 1); j.Verdict != pipeline.Accept || h.Revision() != 2 {
		t.Errorf("got %s %+v, revision %d", j.Verdict, j.Reasons, h.Revision())
	}
}
