package lines

import (
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
)

// drive builds testdata/drive.c with the kernels and returns the program.
func drive(t *testing.T, flags ...string) string {
	t.Helper()
	if testing.Short() {
		t.Skip("builds the kernels anew")
	}
	compiler := os.Getenv("CC")
	if compiler == "" {
		compiler = "gcc"
	}
	if _, err := exec.LookPath(compiler); err != nil {
		t.Skipf("no C compiler: %v", err)
	}
	sources, err := filepath.Glob("*.c")
	if err != nil {
		t.Fatal(err)
	}
	program := filepath.Join(t.TempDir(), "drive")
	args := append([]string{"-std=gnu11", "-ffp-contract=off", "-DLN_NO_CLONES", "-o", program, "testdata/drive.c"}, sources...)
	if out, err := exec.Command(compiler, append(append(args, flags...), "-lm")...).CombinedOutput(); err != nil {
		t.Fatalf("%s %v: %v\n%s", compiler, flags, err, out)
	}
	return program
}

// The kernels under AddressSanitizer and UndefinedBehaviorSanitizer, over random sizes,
// holes, values that are no numbers, lines and settings.
func TestSanitized(t *testing.T) {
	program := drive(t, "-g", "-O1", "-fsanitize=address,undefined", "-fno-sanitize-recover=all")
	if out, err := exec.Command(program, "fuzz", "1", "15").CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
}

// Plain x86-64 and AVX2 give the same bits, and so then do the clones of one binary.
func TestSameBitsOnEveryLevel(t *testing.T) {
	if runtime.GOARCH != "amd64" {
		t.Skip("levels of x86-64")
	}
	digest := func(level string) string {
		out, err := exec.Command(drive(t, "-O3", "-march="+level), "digest").CombinedOutput()
		if err != nil && strings.Contains(err.Error(), "illegal instruction") {
			t.Skipf("this processor is below %s", level)
		}
		if err != nil {
			t.Fatalf("%s: %v\n%s", level, err, out)
		}
		return string(out)
	}
	plain, wide := digest("x86-64"), digest("x86-64-v3")
	if plain != wide || len(strings.Fields(plain)) < 12 {
		t.Errorf("x86-64:\n%s\nx86-64-v3:\n%s", plain, wide)
	}
}
