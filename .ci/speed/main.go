// Command speed measures what the program is to be as fast as, prints a table, and
// fails when a bound does not hold. See `make speed`.
//
// The machine may be shared: so each figure is measured in short rounds, in turn with the
// control or with what it is compared to, and the median of the rounds' ratios counts.
package main

import (
	"flag"
	"fmt"
	"io"
	"os"
	"slices"
	"strings"
	"text/tabwriter"

	"tautwire/voice/lanes"
)

func main() {
	rounds := flag.Int("rounds", 11, "how many times each figure is measured")
	only := flag.String("only", "", "measure only the rows whose names have this `text`")
	flag.Parse()
	if *rounds < 1 {
		fmt.Fprintln(os.Stderr, "speed: -rounds must be 1 or more")
		os.Exit(2)
	}
	dir, err := os.MkdirTemp("", "speed")
	if err == nil {
		err = run(dir, *rounds, *only)
		os.RemoveAll(dir)
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "speed:", err)
		os.Exit(1)
	}
}

// run measures the rows whose names have a text. A row that cannot be measured does not hold, and the others are measured
// all the same.
func run(dir string, rounds int, only string) error {
	b := bench{dir: dir}
	if err := b.build(); err != nil {
		return err
	}
	kernel := lanes.Best().String()
	fmt.Printf("kernel: %s; control: gcc %s\n\n", kernel, b.tuning)
	var results []result
	for _, r := range rows {
		if !strings.Contains(r.name, only) {
			continue
		}
		fmt.Fprintln(os.Stderr, r.name)
		results = append(results, r.measure(&b, rounds, kernel))
	}
	if len(results) == 0 {
		return fmt.Errorf("no row's name has %q", only)
	}
	return report(os.Stdout, results)
}

// report prints the table, then a line for each row that does not hold, and fails if there is one.
func report(to io.Writer, results []result) error {
	out := tabwriter.NewWriter(to, 0, 0, 2, ' ', 0)
	fmt.Fprintln(out, "figure\tmeasured\tratio\tspread\tbound\taim\tholds\t")
	bounds := 0
	var failed []result
	for _, r := range results {
		fmt.Fprintln(out, r.line())
		if r.bound > 0 || r.err != nil {
			bounds++
		}
		if !r.holds() {
			failed = append(failed, r)
		}
	}
	if err := out.Flush(); err != nil {
		return err
	}
	fmt.Fprintln(to)
	for _, r := range failed {
		fmt.Fprintln(to, r.complaint())
	}
	if len(failed) > 0 {
		return fmt.Errorf("%d of %d bounds do not hold", len(failed), bounds)
	}
	fmt.Fprintf(to, "All %d bounds hold.\n", bounds)
	return nil
}

func median(x []float64) float64 {
	x = slices.Sorted(slices.Values(x))
	return x[len(x)/2]
}
