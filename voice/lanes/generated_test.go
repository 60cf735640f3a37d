package lanes

import (
	"os"
	"os/exec"
	"path/filepath"
	"testing"
)

// TestKernelsAreGenerated holds the kernels in the repository to the program that writes them.
func TestKernelsAreGenerated(t *testing.T) {
	dir := t.TempDir()
	if out, err := exec.Command("go", "run", "./asm", "-dir", dir).CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	files, err := filepath.Glob("kernels_*.s")
	if err != nil || len(files) == 0 {
		t.Fatalf("no kernels: %v", err)
	}
	for _, file := range files {
		want, err := os.ReadFile(filepath.Join(dir, file))
		if err != nil {
			t.Fatal(err)
		}
		got, err := os.ReadFile(file)
		if err != nil {
			t.Fatal(err)
		}
		if string(got) != string(want) {
			t.Errorf("%s is not what the program in asm writes: run go generate in voice/lanes", file)
		}
	}
}
