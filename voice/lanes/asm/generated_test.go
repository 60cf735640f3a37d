package main

import (
	"os"
	"path/filepath"
	"testing"
)

// TestKernelsAreGenerated holds the kernels in the repository to this program.
func TestKernelsAreGenerated(t *testing.T) {
	for _, m := range machines() {
		got, err := os.ReadFile(filepath.Join("..", file(m)))
		if err != nil {
			t.Fatal(err)
		}
		if string(got) != generate(m) {
			t.Errorf("%s is not what this program writes: run go generate in voice/lanes", file(m))
		}
	}
}
