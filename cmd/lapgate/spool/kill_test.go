package spool

import (
	"bufio"
	"bytes"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"testing"
	"time"
)

const childDir = "SPOOL_TEST_CHILD_DIR"

func TestMain(m *testing.M) {
	if dir := os.Getenv(childDir); dir != "" {
		putForEver(dir)
	}
	os.Exit(m.Run())
}

// putForEver puts frames, tells each number once Put has returned, and removes every
// third, until it is killed.
func putForEver(dir string) {
	s, err := Open(dir, 1<<30)
	for err == nil {
		var n Number
		if n, err = s.Put(entry("U1"), pixelsOf(s.next)); err != nil {
			break
		}
		fmt.Println(n)
		if n%3 == 0 {
			err = s.Remove(n)
		}
	}
	fmt.Fprintln(os.Stderr, err)
	os.Exit(1)
}

func pixelsOf(n Number) []byte { return bytes.Repeat([]byte(strconv.Itoa(int(n))+" "), 5000) }

// TestKilledAtAnyMoment kills the writer. It shows that no moment between two system
// calls loses or halves a frame; that the disk keeps what it was told to needs a real
// power cut and is not shown.
func TestKilledAtAnyMoment(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "spool")
	var told []Number
	for range 6 {
		told = append(told, runAndKill(t, dir)...)
	}
	s := open(t, dir, 1<<30)
	kept := map[Number]bool{}
	for _, n := range s.Numbers() {
		_, pixels, err := s.Get(n)
		if err != nil || !bytes.Equal(pixels, pixelsOf(n)) {
			t.Errorf("frame %d: %v", n, err)
		}
		kept[n] = true
	}
	for _, n := range told {
		if n%3 != 0 && !kept[n] {
			t.Errorf("frame %d was told to be kept and is gone", n)
		}
	}
	if len(told) == 0 {
		t.Error("nothing was put before the kills: the test has shown nothing")
	}
}

func runAndKill(t *testing.T, dir string) []Number {
	t.Helper()
	cmd := exec.Command(os.Args[0])
	cmd.Env = append(os.Environ(), childDir+"="+dir)
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	kill := time.AfterFunc(time.Duration(50+rand.IntN(200))*time.Millisecond, func() { cmd.Process.Kill() })
	defer kill.Stop()
	var told []Number
	for lines := bufio.NewScanner(out); lines.Scan(); {
		n, err := strconv.ParseUint(lines.Text(), 10, 64)
		if err != nil {
			break // cut by the kill
		}
		told = append(told, Number(n))
	}
	cmd.Wait() //nolint:errcheck // it was killed
	return told
}
