package outside

import (
	"bytes"
	"fmt"
	"os"
	"strconv"
	"strings"
)

// residentBytes returns the resident memory of a process and its children. Of shared
// memory, which the frames are in, only what exceeds frames counts.
func residentBytes(pid int, frames int64) int64 {
	own, sharedMemory := residentOf(pid)
	total := own + max(sharedMemory-frames, 0)
	tasks, err := os.ReadDir(fmt.Sprintf("/proc/%d/task", pid))
	if err != nil {
		return total
	}
	for _, t := range tasks {
		children, _ := os.ReadFile(fmt.Sprintf("/proc/%d/task/%s/children", pid, t.Name()))
		for _, c := range strings.Fields(string(children)) {
			if child, err := strconv.Atoi(c); err == nil {
				total += residentBytes(child, frames)
			}
		}
	}
	return total
}

// residentOf reads VmRSS, split into shared memory and all else.
func residentOf(pid int) (own, sharedMemory int64) {
	text, err := os.ReadFile(fmt.Sprintf("/proc/%d/status", pid))
	if err != nil {
		return 0, 0
	}
	for line := range bytes.Lines(text) {
		name, value, _ := strings.Cut(string(line), ":")
		kib, err := strconv.ParseInt(strings.TrimSuffix(strings.TrimSpace(value), " kB"), 10, 64)
		if err != nil {
			continue
		}
		switch name {
		case "RssAnon", "RssFile":
			own += kib << 10
		case "RssShmem":
			sharedMemory = kib << 10
		}
	}
	return own, sharedMemory
}
