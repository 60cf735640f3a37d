package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/BurntSushi/toml"

	"tautwire/config"
)

func checkCommand() command {
	return command{
		name:  "check",
		args:  "FILE...",
		brief: "what is wrong with patch and rig files, or what they hold",
		about: `
Reads patch and rig files, and built-in patches by their names, as "play" would
find them. Tells everything that is wrong, a line each, or what the file holds
with its units. A pair such as "9 to 4.5 s" goes from the zone's lowest key to
its highest.

Built in are: ` + strings.Join(config.Builtins(), ", ") + ".",
		prepare: func(o *options) func(context.Context, streams, []string) error {
			pictures := o.String("plot", "", "draw how each patch's keys decay and how bright and true they are, into the folder `DIR`")
			form := o.choice("as", pictureSVG, "what --plot draws: `svg` or png", pictureSVG, picturePNG)
			text := o.Bool("text", false, "print the text of each file instead: a built-in patch to start your own from")
			return func(ctx context.Context, s streams, args []string) error {
				if len(args) == 0 {
					return usageError{"check: name at least one patch or rig file; see `tautwire check --help`"}
				}
				if *text {
					return printTexts(s.out, args)
				}
				if *pictures != "" {
					return plotPatches(ctx, s, *pictures, *form, args)
				}
				return check(ctx, s, args)
			}
		},
	}
}

// check tells of every file. Each problem is a line of its own.
func check(ctx context.Context, s streams, names []string) error {
	var failed bool
	for i, name := range names {
		if ctx.Err() != nil {
			return ctx.Err()
		}
		held, err := describe(name)
		if err != nil {
			failed = true
			fmt.Fprintln(s.err, err)
			continue
		}
		if i > 0 {
			fmt.Fprintln(s.out)
		}
		if _, err := io.WriteString(s.out, held); err != nil {
			return err
		}
	}
	if failed {
		return alreadyTold{}
	}
	return nil
}

// describe tells what a file holds.
func describe(name string) (string, error) {
	if isRig(name) {
		r, err := config.LoadRig(name)
		if err != nil {
			return "", err
		}
		return describeRig(r), nil
	}
	p, err := config.LoadPatch(name)
	if err != nil {
		return "", err
	}
	return describePatch(p), nil
}

// isRig tells a rig from a patch by the tables that only rigs have. What can't
// be told is taken for a patch, whose errors then say what is wrong.
func isRig(name string) bool {
	place, err := config.Find(name)
	if err != nil || place.Builtin {
		_, err := config.LoadRig(name)
		return !place.Builtin && err == nil
	}
	var top map[string]any
	if _, err := toml.DecodeFile(place.Path, &top); err != nil {
		return false
	}
	for _, table := range []string{"audio", "midi", "set"} {
		if _, ok := top[table]; ok {
			return true
		}
	}
	return false
}

func printTexts(w io.Writer, names []string) error {
	for _, name := range names {
		place, err := config.Find(name)
		if err != nil {
			return inOneLine(err)
		}
		var text []byte
		if place.Builtin {
			text, err = config.Builtin(place.Path)
		} else {
			text, err = os.ReadFile(place.Path)
		}
		if err != nil {
			return err
		}
		if _, err := io.Copy(w, bytes.NewReader(text)); err != nil {
			return err
		}
	}
	return nil
}

// inOneLine keeps the first of several problems and says how to see the rest.
func inOneLine(err error) error {
	var all config.Problems
	if !errors.As(err, &all) || len(all) < 2 {
		return err
	}
	return fmt.Errorf("%w (and %d more; `tautwire check %s` lists them)", all[0], len(all)-1, all[0].Path)
}

func describeRig(r *config.Rig) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s: a rig\n", r.Path)
	device := strconv.Quote(r.Audio.Device)
	if r.Audio.Device == "" {
		device = "the system's default"
	}
	fmt.Fprintf(&b, "  audio  %s, %d Hz, periods of %d frames (%.2f ms), %s, up to %d strings, level %s dB\n", device,
		r.Audio.Rate, r.Audio.Period, 1e3*float64(r.Audio.Period)/float64(r.Audio.Rate), r.Audio.Timing, r.Audio.Strings, plainly(r.Audio.Level))
	inputs := "every keyboard"
	if len(r.MIDI.Inputs) > 0 {
		inputs = strings.Join(r.MIDI.Inputs, ", ")
	}
	channels := "all channels"
	if len(r.MIDI.Channels) > 0 {
		words := make([]string, len(r.MIDI.Channels))
		for i, c := range r.MIDI.Channels {
			words[i] = strconv.Itoa(c)
		}
		channels = "channels " + strings.Join(words, ", ")
	}
	fmt.Fprintf(&b, "  midi   %s, %s\n", inputs, channels)
	for i, p := range r.Set {
		fmt.Fprintf(&b, "  set    Program Change %d: %s (%s)\n", i+1, p.Title, p.Path)
	}
	return b.String()
}

func describePatch(p *config.Patch) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s: a patch, %q\n", p.Path, p.Title)
	fmt.Fprintf(&b, "  level %s dB, A4 = %s Hz", plainly(p.Level), plainly(p.Tuning.A4))
	if p.Tuning.Cents != [12]float64{} {
		b.WriteString(", tuned C to B by")
		for _, c := range p.Tuning.Cents {
			b.WriteString(" " + plainly(c))
		}
		b.WriteString(" cents")
	}
	b.WriteString("\n")
	t := tabwriter.NewWriter(&b, 0, 0, 2, ' ', 0)
	for _, z := range p.Zones {
		name := config.KeysName(z.Low, z.High)
		for i, part := range zoneParts(z) {
			if i > 0 {
				name = ""
			}
			fmt.Fprintf(t, "  %s\t%s\n", name, part)
		}
	}
	t.Flush()
	if p.Resonance.On {
		fmt.Fprintf(&b, "  resonance %s dB\n", plainly(p.Resonance.Level))
	}
	switch {
	case p.Body.Impulse != nil:
		fmt.Fprintf(&b, "  body %s of the whole, by the impulse response %s\n", plainly(p.Body.Mix), p.Body.Impulse.Path)
	case len(p.Body.Modes) > 0:
		fmt.Fprintf(&b, "  body %s of the whole, %s\n", plainly(p.Body.Mix), plural(len(p.Body.Modes), "mode"))
	}
	if p.Controls.Mute >= 0 {
		fmt.Fprintf(&b, "  controller %d mutes by the palm\n", p.Controls.Mute)
	}
	if p.Controls.Node >= 0 {
		fmt.Fprintf(&b, "  controller %d touches at 1/%d of the string\n", p.Controls.Node, p.Controls.NodeAt)
	}
	if silent := silentKeys(p); silent != "" {
		fmt.Fprintf(&b, "  silent keys: %s\n", silent)
	}
	return b.String()
}

// zoneParts tells a zone in a few lines; what does nothing is left out.
func zoneParts(z config.Zone) []string {
	e := z.Excitation
	stroke := fmt.Sprintf("%s at %s of the length, hardness %s, touch %s", e.Kind, span(e.Position, ""), span(e.Hardness, ""), span(e.Touch, ""))
	switch e.Kind {
	case "noise":
		stroke += ", " + burst(e.Length)
	case "tone":
		stroke += fmt.Sprintf(", %s at %s of the fundamental, %s", e.Wave, span(e.Ratio, ""), burst(e.Length))
	case "sample":
		if e.Sample != nil {
			stroke += ", " + e.Sample.Path
		}
	}
	parts := []string{
		stroke,
		fmt.Sprintf("decay %s, brightness %s, release %s, level %s, pan %s",
			span(z.Decay, "s"), span(z.Brightness, ""), span(z.Release, "s"), span(z.Level, "dB"), span(z.Pan, "")),
	}
	if z.Inharmonicity != (config.Span{}) || z.Tension != (config.Span{}) {
		parts = append(parts, fmt.Sprintf("inharmonicity %s, tension %s", span(z.Inharmonicity, ""), span(z.Tension, "cents")))
	}
	if z.Second.Mix != (config.Span{}) {
		parts = append(parts, fmt.Sprintf("second plane %s of the stroke, %s away, decay %s of the first's",
			span(z.Second.Mix, ""), span(z.Second.Cents, "cents"), span(z.Second.Decay, "")))
	}
	if max(z.Course.Strings.Low, z.Course.Strings.High) > 1 {
		parts = append(parts, fmt.Sprintf("courses of %s, %s wide", span(z.Course.Strings, "strings"), span(z.Course.Cents, "cents")))
	}
	return parts
}

func burst(length config.Span) string {
	if length == (config.Span{}) {
		return "one period long"
	}
	return span(length, "ms") + " long"
}

func span(s config.Span, unit string) string {
	text := plainly(s.Low)
	if s.High != s.Low {
		text += " to " + plainly(s.High)
	}
	if unit != "" {
		text += " " + unit
	}
	return text
}

// plainly writes a number with no more than four digits that count.
func plainly(x float64) string {
	if x == 0 {
		return "0"
	}
	digits := max(0, 3-int(math.Floor(math.Log10(math.Abs(x)))))
	scale := math.Pow(10, float64(digits))
	return strconv.FormatFloat(math.Round(x*scale)/scale, 'f', -1, 64)
}

// silentKeys names the keys that no zone has.
func silentKeys(p *config.Patch) string {
	const keys = 128
	var ranges []string
	first := -1
	for key := range keys + 1 {
		silent := key < keys && !slices.ContainsFunc(p.Zones, func(z config.Zone) bool { return key >= z.Low && key <= z.High })
		switch {
		case silent && first < 0:
			first = key
		case !silent && first >= 0:
			ranges = append(ranges, config.KeysName(first, key-1))
			first = -1
		}
	}
	return strings.Join(ranges, ", ")
}
