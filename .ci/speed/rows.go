package main

import (
	"fmt"
	"os/exec"
	"slices"
	"strconv"
	"strings"
)

// figure is something that is measured: the control, or a metric of a benchmark.
type figure struct {
	room      string // "" is the control, of so many taps
	benchmark string
	metric    string
}

var (
	control = figure{benchmark: "12"}
	usual   = figure{benchmark: "8"}
	plain   = ofVoice("PlainString")
)

// ofVoice is a benchmark of the voice.
func ofVoice(name string) figure { return figure{"voice", name, "ns/string-sample"} }

// row is a line of the table: a figure, as a multiple of a reference where there is one.
type row struct {
	name       string
	of         figure
	reference  figure
	alone      bool    // no reference: the figure itself is bounded
	once       bool    // a round takes long
	bound, aim float64 // 0 is none
}

var rows = []row{
	{name: "control, C, of the same arithmetic", of: control, reference: control},
	{name: "control, C, 8 taps in single precision", of: usual, reference: control},
	{name: "plain string / control", of: plain, reference: control, bound: 0.30, aim: 0.20},
	{name: "plain string / control of 8 taps", of: plain, reference: usual, aim: 0.20},
	{name: "plain string, portable / control", of: ofVoice("PortableString"), reference: control, bound: 1},
	{name: "full string, each loop / control", of: ofVoice("FullString"), reference: control, bound: 0.50, aim: 0.35},
	{name: "bending string / plain string", of: ofVoice("BendingString"), reference: plain, bound: 2},
	{name: "1 string / 128", of: ofVoice("Strings/1"), reference: ofVoice("Strings/128")},
	{name: "8 strings / 128", of: ofVoice("Strings/8"), reference: ofVoice("Strings/128")},
	{name: "32 strings / 128", of: ofVoice("Strings/32"), reference: ofVoice("Strings/128")},
	{name: "64 strings / 128", of: ofVoice("Strings/64"), reference: ofVoice("Strings/128"), bound: 1.5},
	{name: "256 strings / 128", of: ofVoice("Strings/256"), reference: ofVoice("Strings/128"), bound: 1.5},
	{name: "512 strings / 128", of: ofVoice("Strings/512"), reference: ofVoice("Strings/128"), bound: 1.5},
	{name: "512 low strings / 512 of all keys", of: ofVoice("LowStrings"), reference: ofVoice("Strings/512"), bound: 1.5},
	{name: "strings that have died / sounding ones", of: ofVoice("DyingString"), reference: plain, bound: 1.5},
	{name: "63 frames / 64, a frame", of: figure{"engine", "Periods/63", "ns/frame"}, reference: figure{"engine", "Periods/64", "ns/frame"}, bound: 1.5},
	{name: "441 frames / 64, a frame", of: figure{"engine", "Periods/441", "ns/frame"}, reference: figure{"engine", "Periods/64", "ns/frame"}, bound: 1.5},
	{name: "silence, % of a core", of: figure{"engine", "Silence/never_played", "%load"}, alone: true, bound: 1},
	{name: "silence after a stage, % of a core", of: figure{"engine", "Silence/died_away", "%load"}, alone: true, bound: 1},
	{name: "128 keys struck in a period of 64, % of it", of: figure{"engine", "Burst", "%period"}, alone: true, bound: 100},
	{name: "full stage of 128, % of a core", of: figure{"engine", "Stage", "%load"}, alone: true, bound: 25},
	{name: "full stage in JACK, 99.9th percentile, % of a period", of: figure{"tautwire", "StageInJack", "%period"}, alone: true, once: true, bound: 25},
	{name: "compiling a patch, plain, ms", of: figure{"engine", "Compile/stays", "ms/patch"}, alone: true, bound: 50},
	{name: "compiling a patch, everything, ms", of: figure{"engine", "Compile/stiff,_two_planes,_courses", "ms/patch"}, alone: true, bound: 50},
	{name: "from exec to ready, ms", of: figure{"tautwire", "Start", "ms/start"}, alone: true, once: true, bound: 300},
	{name: "full stage, strings a core", of: figure{"engine", "Stage", "strings/core"}, alone: true},
}

// measure makes the line and says whether the bound holds.
func (r *row) measure(b *bench, rounds int) (line string, ok bool, err error) {
	var values, ratios []float64
	if r.once {
		rounds = 1
	}
	for range rounds {
		reference := 1.0
		if !r.alone {
			if reference, err = r.reference.measure(b); err != nil {
				return "", false, err
			}
		}
		value, err := r.of.measure(b)
		if err != nil {
			return "", false, err
		}
		values, ratios = append(values, value), append(ratios, value/reference)
	}
	slices.Sort(ratios)
	ratio := median(ratios)
	number := func(x float64) string {
		if x == 0 {
			return ""
		}
		return strconv.FormatFloat(x, 'g', 3, 64)
	}
	spread := number(ratios[len(ratios)/4]) + " to " + number(ratios[len(ratios)*3/4])
	line = fmt.Sprintf("%s\t%s %s\t%s\t%s\t%s\t%s\t", r.name, number(median(values)), r.of.unit(), number(ratio), spread, number(r.bound), number(r.aim))
	return line, r.bound == 0 || ratio <= r.bound, nil
}

func (f figure) unit() string {
	if f.room == "" {
		return "ns/string-sample"
	}
	return f.metric
}

// measure runs the figure for a short while.
func (f figure) measure(b *bench) (float64, error) {
	if f.room == "" {
		out, err := exec.Command(b.path("control"+f.benchmark), "0.06").Output()
		if err != nil {
			return 0, err
		}
		return strconv.ParseFloat(strings.TrimSpace(string(out)), 64)
	}
	pattern := "^Benchmark" + strings.ReplaceAll(f.benchmark, "/", "$/^") + "$"
	run := exec.Command(b.path(f.room+".test"), "-test.run", "^$", "-test.bench", pattern, "-test.benchtime", "60ms")
	if f.room == "tautwire" { // its tests build the daemon from their own folder
		run.Dir = "cmd/tautwire"
	}
	out, err := run.CombinedOutput()
	if err != nil {
		return 0, fmt.Errorf("%w\n%s", err, out)
	}
	fields := strings.Fields(string(out))
	if i := slices.Index(fields, f.metric); i > 0 {
		return strconv.ParseFloat(fields[i-1], 64)
	}
	return 0, fmt.Errorf("Benchmark%s reports no %s", f.benchmark, f.metric)
}
