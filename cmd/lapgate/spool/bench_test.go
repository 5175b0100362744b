package spool

import (
	"path/filepath"
	"testing"
)

// BenchmarkPut keeps and forgets a frame of 12 megapixels.
func BenchmarkPut(b *testing.B) {
	s, err := Open(filepath.Join(b.TempDir(), "spool"), 1<<30)
	if err != nil {
		b.Fatal(err)
	}
	pixels := make([]byte, 12_000_000)
	b.SetBytes(int64(len(pixels)))
	for b.Loop() {
		n, err := s.Put(entry("U1"), pixels)
		if err == nil {
			err = s.Remove(n)
		}
		if err != nil {
			b.Fatal(err)
		}
	}
}
