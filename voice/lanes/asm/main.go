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
	for _, m := range []machine{avx2{&printer{}}} {
		name := filepath.Join(*dir, "kernels_"+m.goarch()+".s")
		if err := os.WriteFile(name, []byte(generate(m)), 0o644); err != nil {
			fmt.Fprintln(os.Stderr, "asm:", err)
			os.Exit(1)
		}
	}
}
