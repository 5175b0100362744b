package main

import (
	"bytes"
	"context"
	"encoding/json"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// client runs the lapgate program and returns what it wrote.
func (s *site) client(args ...string) (stdout, stderr string, err error) {
	var out, messages bytes.Buffer
	cmd := exec.Command(filepath.Join(s.bin, "lapgate"), append(args, "--server", s.address)...)
	cmd.Stdout, cmd.Stderr = &out, &messages
	err = cmd.Run()
	return out.String(), messages.String(), err
}

// waitingHash returns the recipe that waits for approval, "" for none.
func (s *site) waitingHash() string {
	s.t.Helper()
	out, messages, err := s.client("recipes", "--json")
	var doc struct{ Waiting []struct{ Hash string } }
	if err == nil {
		err = json.Unmarshal([]byte(out), &doc)
	}
	if err != nil {
		s.t.Fatal(err, messages)
	}
	if len(doc.Waiting) == 0 {
		return ""
	}
	return doc.Waiting[0].Hash
}

// Without development a recipe judges nothing until a second person approved it; a later
// save waits, and over a kill the approved one stays in force.
func TestApprovalWithRealPrograms(t *testing.T) {
	s := newSite(t, 1) // u0000 has a dig of 8 px
	s.flags = []string{"--development=false"}
	s.serve()
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	if err := s.feedCommand(ctx, "refused.jsonl").Run(); err == nil {
		t.Error("feed without an approved recipe: status 0")
	}
	if v := s.answered("refused.jsonl"); len(v) == 0 || !strings.Contains(stringOf(v[0]), "lapgate approve sha256:") {
		t.Errorf("answers %v, want one that says which command to run", v)
	}
	hash := s.waitingHash()
	if _, messages, err := s.client("approve", hash, "--author", "Q. Engineer", "--person", "Q. Engineer", "--reason", "x", "--effective", "now"); err == nil || !strings.Contains(messages, "second person") {
		t.Errorf("approved by its author: %v, %s", err, messages)
	}
	if _, messages, err := s.client("approve", hash, "--author", "Q. Engineer", "--person", "A. Pprover", "--reason", "drawing B", "--effective", "now"); err != nil {
		t.Fatal(err, messages)
	}
	s.check(s.feedCommand(ctx, "first.jsonl").Run())
	s.write("recipes/disc.yaml", strings.Replace(processRecipe, "at_most: 60", "at_most: 600", 1))
	for range 100 {
		if s.waitingHash() != "" {
			break
		}
		time.Sleep(50 * time.Millisecond)
	}
	s.kill()
	s.serve()
	s.check(s.feedCommand(ctx, "second.jsonl", "--attempt", "2").Run())
	for _, name := range []string{"first.jsonl", "second.jsonl"} {
		if v := s.answered(name); len(v) != 1 || v[0]["verdict"] != "reject" {
			t.Errorf("%s: %v, want the approved recipe's reject", name, v)
		}
	}
	if next := s.waitingHash(); next == "" || next == hash {
		t.Errorf("waiting: %q, want the later save", next)
	}
}

func stringOf(v map[string]any) string {
	b, _ := json.Marshal(v)
	return string(b)
}
