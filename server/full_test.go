//go:build linux

package server_test

import (
	"context"
	"fmt"
	"path/filepath"
	"strings"
	"syscall"
	"testing"

	"google.golang.org/grpc/codes"
)

// A full disk: new units are refused with a clear error, every answered verdict stays in
// the ledger, and the ledger stays whole. The disk is a real file system of 1 MiB, which
// only root may mount.
func TestFullDisk(t *testing.T) {
	disk := t.TempDir()
	if err := syscall.Mount("tmpfs", disk, "tmpfs", 0, "size=1m"); err != nil {
		t.Skipf("a small file system cannot be mounted here (%v); this test needs root", err)
	}
	path := filepath.Join(disk, "ledger.db")
	r := newRig(t, rigOptions{dsn: path})
	t.Cleanup(func() { _ = syscall.Unmount(disk, syscall.MNT_DETACH) })
	l := r.line()
	for i := range 200 {
		l.showUnit(fmt.Sprintf("u%02d", i), uint64(i), 8)
	}
	l.finish()
	if len(l.refused) == 0 || len(l.verdicts) == 0 {
		t.Fatalf("%d verdicts and %d refusals, want some of each", len(l.verdicts), len(l.refused))
	}
	for _, f := range l.refused {
		if !strings.Contains(f.Message, "full") || codes.Code(f.Code) == codes.InvalidArgument {
			t.Errorf("refusal %v, want one that says that the disk is full", f)
		}
	}
	for unit, v := range l.verdicts {
		if _, err := r.ledger.Unit(context.Background(), "disc", unit); err != nil {
			t.Errorf("unit %s was answered %v: %v", unit, v.Judgement.Verdict, err)
		}
	}
}
