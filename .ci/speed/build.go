package main

import (
	"fmt"
	"os/exec"
	"path/filepath"
	"strings"
)

// bench is the programs that measure.
type bench struct {
	dir    string
	tuning string // the control's flags
}

// build compiles the control, with the arithmetic of the program's strings and with the usual one,
// and the benchmarks.
func (b *bench) build() error {
	if err := b.buildControls(); err != nil {
		return err
	}
	for _, room := range []string{"voice", "engine", "cmd/tautwire"} {
		if err := command("go", "test", "-c", "-o", b.path(filepath.Base(room)+".test"), "./"+room); err != nil {
			return err
		}
	}
	return nil
}

// buildControls tunes the controls for this processor by the first of its names for it that the
// compiler knows: not every one knows -march=native on arm64, but then -mcpu=native.
func (b *bench) buildControls() (err error) {
	for _, native := range []string{"-march=native", "-mcpu=native", ""} {
		flags := append([]string{"-O3", "-ffast-math"}, strings.Fields(native)...)
		if err = b.buildControl("12", flags); err == nil {
			b.tuning = strings.Join(flags, " ")
			return b.buildControl("8", flags)
		}
	}
	return err
}

func (b *bench) buildControl(taps string, flags []string) error {
	args := append([]string{"-DTAPS=" + taps, ".ci/speed/control/plain.c", "-o", b.path("control" + taps)}, flags...)
	return command("gcc", args...)
}

func (b *bench) path(name string) string { return filepath.Join(b.dir, name) }

func command(name string, args ...string) error {
	if out, err := exec.Command(name, args...).CombinedOutput(); err != nil {
		return fmt.Errorf("%s: %w\n%s", name, err, out)
	}
	return nil
}
