// Checker is the judge of the virtual stage: it reads what the guest left in a
// folder and says of each scenario whether it passed.
//
//	checker DIR
//
// DIR holds interface.wav (what the audio interface was given to play), record
// (the guest's marks and facts) and the daemon's logs. A line for each scenario
// goes to standard output, the count last. The status is 0 when all passed, 1
// when one failed or there is nothing to judge, 2 for wrong usage.
package main

import (
	"fmt"
	"io"
	"os"
	"strings"
)

func main() {
	if len(os.Args) != 2 {
		fmt.Fprintln(os.Stderr, "usage: checker DIR")
		os.Exit(2)
	}
	t, err := readTake(os.Args[1])
	if err != nil {
		fmt.Fprintf(os.Stderr, "checker: %v\n", err)
	}
	if failed := judge(os.Stdout, t); failed > 0 || err != nil {
		os.Exit(1)
	}
}

// judge writes a line for each scenario, and the count, after what may be the
// reason of a failure.
func judge(w io.Writer, t *take) (failed int) {
	for _, what := range t.vain {
		fmt.Fprintf(w, "the guest waited in vain for %s\n", what)
	}
	all := scenarios()
	for _, s := range all {
		found, err := s.judge(t)
		if err != nil {
			failed++
			fmt.Fprintf(w, "FAIL %s: %s\n", s.name, strings.ReplaceAll(err.Error(), "\n", "; "))
			continue
		}
		fmt.Fprintf(w, "PASS %s: %s\n", s.name, found)
	}
	fmt.Fprintf(w, "%d passed, %d failed\n", len(all)-failed, failed)
	return failed
}
