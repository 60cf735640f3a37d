// Command asm writes the vector kernels of the package lanes: one description,
// in kernel.go, printed in the assembly of each processor. Run it by go generate in the
// package's folder.
package main

import (
	"flag"
	"fmt"
	"os"
	"path/filepath"
)

func main() {
	dir := flag.String("dir", ".", "folder to write to")
	flag.Parse()
	for _, m := range machines() {
		if err := os.WriteFile(filepath.Join(*dir, file(m)), []byte(generate(m)), 0o644); err != nil {
			fmt.Fprintln(os.Stderr, "asm:", err)
			os.Exit(1)
		}
	}
}

func machines() []machine { return []machine{avx2{&printer{}}, neon{&printer{}}} }

func file(m machine) string { return "kernels_" + m.goarch() + ".s" }
