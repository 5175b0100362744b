package outside

import (
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"golang.org/x/sys/unix"
)

// keepFromChildren has the memory files closed in every program that this process starts:
// a child that outlives a killed server must not hold its memory.
func keepFromChildren() {
	for _, path := range []string{inputPath, outputPath, arenaPath} {
		to, err := os.Readlink(path)
		fd, notNumber := strconv.Atoi(filepath.Base(path))
		if err == nil && notNumber == nil && strings.HasPrefix(to, "/memfd:") {
			unix.CloseOnExec(fd)
		}
	}
}
