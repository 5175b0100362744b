package outside

import (
	"bufio"
	"context"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"golang.org/x/sys/unix"
)

// hostForTest hosts a stage until it is killed. It prints how the stage is bound to it.
func hostForTest(args []string) {
	set := settingsFor(args[1:]...)
	set.noNamespace = args[0] == "signal"
	set.Frames, _ = NewArena(1 << 20)
	h, err := Open(context.Background(), set, nil)
	if err != nil {
		fmt.Println(err)
		os.Exit(1)
	}
	stage, _, err := h.Factory().New(nil, pipelineEnvironment())
	if err == nil {
		err = stage.Run(context.Background(), tiny(3))
	}
	fmt.Println(h.Status().Isolation, err)
	select {}
}

// A host that is killed with SIGKILL leaves no process of the stage and no memory file
// behind: of the stage's own children too where it has a namespace.
func TestKilledHost(t *testing.T) {
	for _, binding := range []string{"namespace", "signal"} {
		t.Run(binding, func(t *testing.T) {
			host := exec.Command(os.Args[0], "host", binding, "hostile", "child")
			out, err := host.StdoutPipe()
			if err != nil {
				t.Fatal(err)
			}
			if err := host.Start(); err != nil {
				t.Fatal(err)
			}
			line, err := bufio.NewReader(out).ReadString('\n')
			if err != nil || !strings.HasSuffix(line, "<nil>\n") {
				host.Process.Kill()
				t.Fatalf("got %q, %v", line, err)
			}
			wantDirect, all := 1, descendants(host.Process.Pid)
			memory := memoryFiles(host.Process.Pid)
			if len(all) != 2 || len(memory) != 3 || len(memoryFiles(all[0])) != 3 {
				t.Errorf("processes %v, memory files %v of the host and %v of the stage; want the stage and its child, and input, output and frames", all, memory, memoryFiles(all[0]))
			}
			if strings.Contains(line, "its own PID namespace") {
				wantDirect = 2
			} else if binding == "namespace" {
				t.Logf("no namespace is allowed here: %s", line)
			}
			host.Process.Kill()
			host.Wait()
			eventually(t, "the stage's processes are gone", func() bool { return len(all) == 0 || countGone(all[:wantDirect]) == wantDirect })
			eventually(t, "nobody has the memory files open", func() bool { return !heldBy(memory) })
			for _, pid := range all[wantDirect:] { // the child that only a namespace reaches
				if p, err := os.FindProcess(pid); err == nil {
					p.Kill()
				}
			}
		})
	}
}

// descendants returns the processes below one, parents first.
func descendants(pid int) []int {
	var out []int
	files, _ := filepath.Glob("/proc/[0-9]*/stat")
	for _, f := range files {
		text, _ := os.ReadFile(f)
		var child, parent int
		if i := strings.LastIndex(string(text), ")"); i > 0 {
			fmt.Sscan(string(text), &child)
			var state string
			fmt.Sscan(string(text[i+1:]), &state, &parent)
		}
		if parent == pid {
			out = append(append(out, child), descendants(child)...)
		}
	}
	return out
}

// memoryFiles returns the memory files that a process has open, by inode.
func memoryFiles(pid int) map[uint64]bool {
	out := map[uint64]bool{}
	files, _ := filepath.Glob(fmt.Sprintf("/proc/%d/fd/*", pid))
	for _, f := range files {
		var info unix.Stat_t
		if to, _ := os.Readlink(f); strings.HasPrefix(to, "/memfd:lapgate") && unix.Stat(f, &info) == nil {
			out[info.Ino] = true
		}
	}
	return out
}

// heldBy reports whether any process has one of the memory files open.
func heldBy(memory map[uint64]bool) bool {
	pids, _ := filepath.Glob("/proc/[0-9]*")
	for _, p := range pids {
		var pid int
		fmt.Sscan(filepath.Base(p), &pid)
		for inode := range memoryFiles(pid) {
			if memory[inode] {
				return true
			}
		}
	}
	return false
}

func countGone(pids []int) int {
	n := 0
	for _, pid := range pids {
		if gone(pid) || zombie(pid) {
			n++
		}
	}
	return n
}

// zombie reports whether a process is dead and only waits to be counted.
func zombie(pid int) bool {
	text, err := os.ReadFile(fmt.Sprintf("/proc/%d/stat", pid))
	i := strings.LastIndex(string(text), ")")
	return err != nil || i > 0 && strings.HasPrefix(string(text[i+1:]), " Z")
}
