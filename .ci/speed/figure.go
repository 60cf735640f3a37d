package main

import (
	"fmt"
	"os/exec"
	"slices"
	"strconv"
	"strings"
)

// figure is something that is measured, in short.
type figure interface {
	measure(b *bench) (float64, error)
	unit() string
}

// control is the control in C, of so many taps.
type control string

func (c control) unit() string { return "ns/string-sample" }

func (c control) measure(b *bench) (float64, error) {
	out, err := exec.Command(b.path("control"+string(c)), "0.06").Output()
	if err != nil {
		return 0, err
	}
	return strconv.ParseFloat(strings.TrimSpace(string(out)), 64)
}

// metric is what a benchmark of a room reports in a unit.
type metric struct{ room, benchmark, of string }

func (m metric) unit() string { return m.of }

func (m metric) measure(b *bench) (float64, error) {
	pattern := "^Benchmark" + strings.ReplaceAll(m.benchmark, "/", "$/^") + "$"
	run := exec.Command(b.path(m.room+".test"), "-test.run", "^$", "-test.bench", pattern, "-test.benchtime", "60ms")
	if m.room == "tautwire" { // its tests build the daemon from their own folder
		run.Dir = "cmd/tautwire"
	}
	out, err := run.CombinedOutput()
	if err != nil {
		return 0, fmt.Errorf("%w\n%s", err, out)
	}
	fields := strings.Fields(string(out))
	if i := slices.Index(fields, m.of); i > 0 {
		return strconv.ParseFloat(fields[i-1], 64)
	}
	return 0, fmt.Errorf("Benchmark%s reports no %s", m.benchmark, m.of)
}

// more is what each further string costs between two numbers of strings.
type more struct{ from, to int }

func (m more) unit() string { return "ns/string-sample" }

func (m more) measure(b *bench) (float64, error) {
	few, err := strung(m.from).measure(b)
	if err != nil {
		return 0, err
	}
	many, err := strung(m.to).measure(b)
	return (many*float64(m.to) - few*float64(m.from)) / float64(m.to-m.from), err
}

// strung is the benchmark of so many plain strings.
func strung(n int) metric { return ofVoice(fmt.Sprintf("Strings/%d", n)) }

// ofVoice is a benchmark of the voice.
func ofVoice(name string) metric { return metric{"voice", name, "ns/string-sample"} }

// ofEngine and ofProgram are a metric of a benchmark of theirs.
func ofEngine(name, unit string) metric  { return metric{"engine", name, unit} }
func ofProgram(name, unit string) metric { return metric{"tautwire", name, unit} }
