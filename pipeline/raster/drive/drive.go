package drive

import (
	"cmp"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
)

// build compiles testdata/drive.c and the kernels of the folder that the test runs in, and
// returns the program. Products are not contracted, and no kernel has clones: the flags
// choose the one level.
func build(t *testing.T, compiler string, flags ...string) string {
	t.Helper()
	if testing.Short() {
		t.Skip("builds the kernels anew")
	}
	if _, err := exec.LookPath(compiler); err != nil {
		t.Skipf("no C compiler here: %v", err)
	}
	sources, err := filepath.Glob("*.c")
	if err != nil {
		t.Fatal(err)
	}
	program := filepath.Join(t.TempDir(), "drive")
	args := append([]string{"-std=gnu11", "-ffp-contract=off", "-DPG_NO_CLONES", "-DLN_NO_CLONES", "-o", program, "testdata/drive.c"}, sources...)
	if out, err := exec.Command(compiler, append(append(args, flags...), "-lm")...).CombinedOutput(); err != nil {
		t.Fatalf("%s %v: %v\n%s", compiler, flags, err, out)
	}
	return program
}

// native is the C compiler for the machine the test runs on.
func native() string { return cmp.Or(os.Getenv("CC"), "gcc") }

// Sanitized runs "fuzz 1 COUNT" under AddressSanitizer and UndefinedBehaviorSanitizer.
func Sanitized(t *testing.T, count string) {
	t.Helper()
	run(t, build(t, native(), "-g", "-O1", "-fsanitize=address,undefined", "-fno-sanitize-recover=all"), "fuzz", "1", count)
}

// SameBitsOnEveryLevel wants one digest of plain x86-64 and of AVX2: then the clones of one
// binary give the same bits, too.
func SameBitsOnEveryLevel(t *testing.T) {
	t.Helper()
	if runtime.GOARCH != "amd64" {
		t.Skip("levels of x86-64")
	}
	digest := func(level string) string {
		out, err := exec.Command(build(t, native(), "-O3", "-march="+level), "digest").CombinedOutput()
		if err != nil && strings.Contains(err.Error(), "illegal instruction") {
			t.Skipf("this processor is below %s", level)
		}
		if err != nil {
			t.Fatalf("%s: %v\n%s", level, err, out)
		}
		return string(out)
	}
	same(t, "x86-64", digest("x86-64"), "x86-64-v3", digest("x86-64-v3"))
}

// What builds for arm64 and runs it: Debian's gcc-aarch64-linux-gnu, and qemu-user-static
// or qemu-user.
const armCompiler = "aarch64-linux-gnu-gcc"

var armRunners = []string{"qemu-aarch64-static", "qemu-aarch64"}

// Arm64 wants the digest of an arm64 build, run under qemu, to be that of this machine, and
// "fuzz 1 COUNT" to pass there. It skips where a compiler for arm64 or qemu is missing.
func Arm64(t *testing.T, count string) {
	t.Helper()
	runner := ""
	for _, name := range armRunners {
		if path, err := exec.LookPath(name); err == nil && runner == "" {
			runner = path
		}
	}
	if runner == "" {
		t.Skip("no qemu-aarch64 here: make arm64 installs it")
	}
	program := build(t, armCompiler, "-O3", "-static")
	same(t, "this machine", run(t, build(t, native(), "-O1"), "digest"), "arm64", run(t, runner, program, "digest"))
	run(t, runner, program, "fuzz", "1", count)
}

func run(t *testing.T, program string, args ...string) string {
	t.Helper()
	out, err := exec.Command(program, args...).CombinedOutput()
	if err != nil {
		t.Fatalf("%s %v: %v\n%s", filepath.Base(program), args, err, out)
	}
	return string(out)
}

func same(t *testing.T, one, digest, two, other string) {
	t.Helper()
	if digest != other || len(strings.Fields(digest)) < 12 {
		t.Errorf("%s:\n%s\n%s:\n%s", one, digest, two, other)
	}
}
