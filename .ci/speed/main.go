// Command speed measures what the program is to be as fast as, prints a table, and
// fails when a bound does not hold. See `make speed`.
//
// The machine may be shared: so each figure is measured in short rounds, in turn with the
// control or with what it is compared to, and the median of the rounds' ratios counts.
package main

import (
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"text/tabwriter"
)

func main() {
	rounds := flag.Int("rounds", 11, "how many times each figure is measured")
	flag.Parse()
	dir, err := os.MkdirTemp("", "speed")
	if err == nil {
		defer os.RemoveAll(dir)
		err = run(dir, *rounds)
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "speed:", err)
		os.Exit(1)
	}
}

func run(dir string, rounds int) error {
	b := bench{dir: dir}
	if err := b.build(); err != nil {
		return err
	}
	out := tabwriter.NewWriter(os.Stdout, 0, 0, 2, ' ', 0)
	fmt.Fprintln(out, "figure\tmeasured\tratio\tspread\tbound\taim\t")
	failed := 0
	for _, r := range rows {
		line, ok, err := r.measure(&b, rounds)
		if err != nil {
			return fmt.Errorf("%s: %w", r.name, err)
		}
		if !ok {
			failed++
			line += "does not hold"
		}
		fmt.Fprintln(out, line)
		fmt.Fprintf(os.Stderr, "%s: done\n", r.name)
	}
	if err := out.Flush(); err != nil {
		return err
	}
	if failed > 0 {
		return fmt.Errorf("%d of %d bounds do not hold", failed, len(rows))
	}
	return nil
}

// bench is the programs that measure.
type bench struct{ dir string }

// build compiles the control, with the arithmetic of the program's strings and with the usual one,
// and the benchmarks.
func (b *bench) build() error {
	for _, taps := range []string{"12", "8"} {
		if err := command("gcc", "-O3", "-march=native", "-ffast-math", "-DTAPS="+taps, ".ci/speed/control/plain.c", "-o", b.path("control"+taps)); err != nil {
			return err
		}
	}
	for _, room := range []string{"voice", "engine", "cmd/tautwire"} {
		if err := command("go", "test", "-c", "-o", b.path(filepath.Base(room)+".test"), "./"+room); err != nil {
			return err
		}
	}
	return nil
}

func (b *bench) path(name string) string { return filepath.Join(b.dir, name) }

func command(name string, args ...string) error {
	if out, err := exec.Command(name, args...).CombinedOutput(); err != nil {
		return fmt.Errorf("%s: %w\n%s", name, err, out)
	}
	return nil
}

func median(x []float64) float64 {
	x = slices.Sorted(slices.Values(x))
	return x[len(x)/2]
}
