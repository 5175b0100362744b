// Package drive builds a package's testdata/drive.c with its C kernels and runs it, for
// tests: under sanitizers, for several levels of x86-64 and for arm64. What the kernels do,
// and what a right answer of theirs is, it leaves to the drive.
package drive
