package main

import (
	"context"
	"fmt"
	"io"
	"strings"
	"text/tabwriter"

	"tautwire/engine/output"
	"tautwire/midiin"
)

func devicesCommand() command {
	return command{
		name:  "devices",
		brief: "audio outputs and MIDI inputs, and the words that select them",
		about: `
Lists what this machine has. The first column is what "play" wants after
--device or --midi to select it; a part of it will do, in small or capital
letters. Beside those, --midi takes the path of any stream of MIDI bytes: a
FIFO, a terminal, a serial port, /dev/snd/midiC1D0.`,
		prepare: func(o *options) func(context.Context, streams, []string) error {
			check := o.Bool("check", false, "list nothing; fail where there is no audio output")
			verbose := o.Bool("verbose", false, "show what sound libraries say while they look")
			return func(_ context.Context, s streams, args []string) error {
				if len(args) > 0 {
					return usageError{fmt.Sprintf("devices: %q is no option; see `tautwire devices --help`", args[0])}
				}
				outputs, err := (&output.System{Verbose: *verbose}).Devices()
				if err != nil {
					return err
				}
				if *check {
					return anyOutput(outputs)
				}
				listOutputs(s.out, outputs)
				fmt.Fprintln(s.out)
				return listInputs(s.out, *verbose)
			}
		},
	}
}

// anyOutput fails where nothing can be heard.
func anyOutput(outputs []output.Device) error {
	for _, d := range outputs {
		if !isSilent(d) {
			return nil
		}
	}
	return &output.NoDeviceError{}
}

func isSilent(d output.Device) bool { return strings.EqualFold(d.Name, "null") && d.Host == d.Name }

func listOutputs(w io.Writer, outputs []output.Device) {
	fmt.Fprintln(w, "Audio outputs (--device)")
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	for _, d := range outputs {
		if isSilent(d) {
			fmt.Fprintf(t, "  %s\tno sound, paced by the clock\n", d.Words)
			continue
		}
		chosen := ""
		if d.Default {
			chosen = ", taken where none is named"
		}
		fmt.Fprintf(t, "  %s\t%s, %s, %d Hz, from %.1f ms%s\n", d.Words, d.Host, plural(d.Channels, "channel"), d.Rate, 1e3*d.Latency.Seconds(), chosen)
	}
	t.Flush()
	if anyOutput(outputs) != nil {
		fmt.Fprintln(w, "  Nothing here makes a sound: plug an audio interface in, or start JACK or PipeWire.")
	}
}

// listInputs lists the sequencer's ports. A machine without a sequencer is told
// of, and no failure.
func listInputs(w io.Writer, verbose bool) error {
	fmt.Fprintln(w, "MIDI inputs (--midi)")
	s, err := midiin.OpenSequencer(midiin.SequencerOptions{Verbose: verbose})
	if err != nil {
		fmt.Fprintf(w, "  %v\n", err)
		return nil
	}
	defer s.Close()
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	ports := s.Ports()
	for _, p := range ports {
		through := ""
		if p.Through {
			through = ", passes on what others send; listened to only where named"
		}
		fmt.Fprintf(t, "  %s\t%s%s\n", p.Name, p.Address, through)
	}
	t.Flush()
	if len(ports) == 0 {
		fmt.Fprintln(w, "  none yet; a keyboard plays as soon as it is plugged in")
	}
	return nil
}
