package main

import (
	"cmp"
	"context"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"time"

	"tautwire/config"
	"tautwire/engine"
	"tautwire/engine/output"
	"tautwire/midiin"
	"tautwire/voice"
)

const (
	// renderRate and renderPeriod hold where the command line says nothing.
	renderRate   = 48000 // Hz
	renderPeriod = 64    // frames
	// renderTail is how long the last notes may ring.
	renderTail = 5.0 // s
	// renderFade is the part of the tail in which what still rings is faded.
	renderFade = 0.35 // s
	// renderDense is how many events a chunk has at most; the engine's queue holds more.
	renderDense = engine.QueueLength / 4
)

// renderOptions are what the command line asks of render.
type renderOptions struct {
	patch, out, key, bits  string
	rate, period, velocity int
	tail, seconds          float64
	demo                   bool
	performance            string
}

func renderCommand() command {
	return command{
		name:  "render",
		args:  "PERFORMANCE.mid --out FILE.wav",
		brief: "the same instrument into a file, the same bytes every time",
		about: `
Plays a standard MIDI file of type 0 or 1 into a WAV file, as fast as it can:
stereo, the same samples as "play" gives, whatever the period. Program Change n
takes the n-th built-in patch. In place of a file, --demo is the demo
performance, and --key a single note.`,
		prepare: func(o *options) func(context.Context, streams, []string) error {
			var r renderOptions
			o.StringVar(&r.patch, "patch", "", "`FILE` or name of the patch to play (default "+config.DefaultPatch+")")
			o.StringVar(&r.out, "out", "", "`FILE` that is written; - is standard output")
			o.StringVar(&r.key, "key", "", "render one note: a `KEY` such as A4 or 69")
			o.BoolVar(&r.demo, "demo", false, "render the demo performance")
			bits := o.choice("bits", "float", "`WORD`: float is 32-bit floating point, 24 whole numbers of 24 bits (default float)", "float", "24")
			rate := o.whole("rate", 8000, 192000, "`HZ` (default 48000)")
			period := o.whole("period", 1, 4096, "`FRAMES` rendered at once (default 64)")
			velocity := o.whole("velocity", 1, 127, "`VELOCITY` of --key (default 100)")
			seconds := o.number("seconds", 0.001, 3600, 2, "`SECONDS` that --key is held (default 2)")
			tail := o.number("tail", 0, 600, renderTail, "`SECONDS` after the end in which the last notes ring out (default 5)")
			return func(ctx context.Context, s streams, args []string) error {
				r.bits, r.rate, r.period = *bits, cmp.Or(*rate, renderRate), cmp.Or(*period, renderPeriod)
				r.velocity, r.seconds, r.tail = cmp.Or(*velocity, 100), *seconds, *tail
				if err := r.settle(args); err != nil {
					return usageError{"render: " + err.Error() + "; see `tautwire render --help`"}
				}
				return render(ctx, s, r)
			}
		},
	}
}

// settle checks that exactly one thing is to be rendered, and where to.
func (r *renderOptions) settle(args []string) error {
	if len(args) > 1 {
		return fmt.Errorf("one performance at a time; found %q after %q", args[1], args[0])
	}
	given := len(args)
	if r.demo {
		given++
	}
	if r.key != "" {
		given++
	}
	switch {
	case given == 0:
		return fmt.Errorf("nothing to render; name a MIDI file, or say --demo or --key KEY")
	case given > 1:
		return fmt.Errorf("more than one thing to render; say one of a MIDI file, --demo and --key KEY")
	case r.out == "":
		return fmt.Errorf("no file to write; say --out FILE.wav")
	}
	if r.key != "" {
		if _, err := config.ParseKey(r.key); err != nil {
			return fmt.Errorf("--key: %w", err)
		}
	}
	if len(args) == 1 {
		r.performance = args[0]
	}
	return nil
}

// perform gives what is to be played.
func (r *renderOptions) perform() (*midiin.Performance, error) {
	switch {
	case r.demo:
		return midiin.Demo()
	case r.key == "":
		return midiin.ReadSMF(r.performance)
	}
	key, err := config.ParseKey(r.key)
	if err != nil {
		return nil, err
	}
	end := time.Duration(r.seconds * float64(time.Second))
	return &midiin.Performance{
		Name: config.KeyName(key),
		Events: []engine.Event{
			{Kind: engine.NoteOn, Key: uint8(key), Value: float32(r.velocity)},
			{Kind: engine.NoteOff, Key: uint8(key), Value: 64, Time: int64(end)},
		},
		End: end,
	}, nil
}

func render(ctx context.Context, s streams, r renderOptions) (err error) {
	performance, err := r.perform()
	if err != nil {
		return err
	}
	patches, err := builtins()
	if err != nil {
		return err
	}
	first := patches[0]
	if r.patch != "" {
		if first, err = config.LoadPatch(r.patch); err != nil {
			return inOneLine(err)
		}
	}
	begin, err := engine.Compile(first, r.rate)
	if err != nil {
		return err
	}
	programs, err := compilePrograms(performance, patches, r.rate)
	if err != nil {
		return err
	}
	w, finish, err := r.create(s)
	if err != nil {
		return err
	}
	defer func() { err = finish(err) }()
	o := &offline{
		engine:   engine.New(begin, engine.Options{Rate: r.rate, Timing: engine.Offline, Voices: 512}),
		rate:     r.rate,
		period:   r.period,
		programs: programs,
	}
	seconds := performance.End.Seconds() + r.tail
	p := newProgress(s.err, "rendering "+filepath.Base(r.out), seconds)
	defer p.done()
	frames := int64(math.Ceil(seconds * float64(r.rate)))
	if err := o.play(ctx, performance, frames, w.Write, p); err != nil {
		return err
	}
	if n := o.engine.Counts().Refused; n > 0 {
		fmt.Fprintf(s.err, "caution: %s too many at one moment, left out\n", plural(n, "event"))
	}
	return nil
}

// create begins the WAV file. The file is finished with what became of the
// rendering: after an error nothing is left of it.
func (r *renderOptions) create(s streams) (w *output.WAV, finish func(error) error, err error) {
	var file *os.File
	if r.out == "-" {
		// A WAV file begins with its length, which is known last. The name goes at
		// once, so that nothing is left behind when the pipe's reader ends us.
		if file, err = os.CreateTemp("", "tautwire-*.wav"); err == nil {
			os.Remove(file.Name())
		}
	} else {
		file, err = os.Create(r.out)
	}
	if err != nil {
		return nil, nil, fmt.Errorf("%w; name another file with --out", err)
	}
	finish = func(err error) error {
		if err == nil {
			err = w.Close()
		}
		if err == nil && r.out == "-" {
			err = copyFrom(file, s.out)
		}
		if closed := file.Close(); err == nil {
			err = closed
		}
		if err != nil && r.out != "-" {
			os.Remove(r.out)
		}
		if err != nil {
			return fmt.Errorf("%s is not written: %w", r.out, err)
		}
		return nil
	}
	form := output.Float32
	if r.bits == "24" {
		form = output.PCM24
	}
	if w, err = output.NewWAV(file, r.rate, form); err != nil {
		return nil, nil, finish(err)
	}
	return w, finish, nil
}

func copyFrom(file *os.File, to io.Writer) error {
	if _, err := file.Seek(0, io.SeekStart); err != nil {
		return err
	}
	_, err := io.Copy(to, file)
	return err
}

// compilePrograms compiles the patches that a performance asks for, and no other.
// Numbers that there are no patches for change nothing.
func compilePrograms(p *midiin.Performance, patches []*config.Patch, rate int) (map[int]*engine.Compiled, error) {
	programs := map[int]*engine.Compiled{}
	for _, e := range p.Events {
		n := int(e.Value)
		if e.Kind != engine.Program || n < 0 || n >= len(patches) || programs[n] != nil {
			continue
		}
		c, err := engine.Compile(patches[n], rate)
		if err != nil {
			return nil, err
		}
		programs[n] = c
	}
	return programs, nil
}

// offline plays a performance as fast as it can.
type offline struct {
	engine *engine.Engine
	rate   int
	period int // frames rendered at once, at most
	// programs are the patches that the performance asks for, by their numbers.
	programs map[int]*engine.Compiled
}

// frame is the frame at which an event takes effect.
func (o *offline) frame(e engine.Event) int64 {
	return int64(math.Round(float64(e.Time) * float64(o.rate) / 1e9))
}

// play gives frames of the performance to write. The limiter's look-ahead is
// left out at the start, so that a note stands in the file where it stands in
// the performance. What still rings at the end is faded.
func (o *offline) play(ctx context.Context, p *midiin.Performance, frames int64, write func([]float32) error, bar *progress) error {
	skip := int64(o.engine.Delay())
	total := frames + skip
	fade := max(0, onGrid(total-int64(renderFade*float64(o.rate))))
	events := p.Events
	period := make([]float32, 2*o.period)
	for at := int64(0); at < total; {
		if err := ctx.Err(); err != nil {
			return err
		}
		if at == fade {
			o.engine.Quiet()
		}
		o.swap(events, at)
		until := min(at+int64(o.period), total)
		if fade > at {
			until = min(until, fade)
		}
		until = o.nextSwap(events, at, until)
		var sent int
		sent, until = o.send(events, at, until)
		events = events[sent:]
		out := period[:2*(until-at)]
		o.engine.Render(out)
		if err := write(out[2*min(max(skip-at, 0), until-at):]); err != nil {
			return err
		}
		bar.add(float64(until-at) / float64(o.rate))
		at = until
	}
	return nil
}

// send hands over the events that are due before a frame, or fewer where they
// are very many, and gives the frame until which they suffice.
func (o *offline) send(events []engine.Event, at, until int64) (int, int64) {
	for i, e := range events {
		frame := o.frame(e)
		if frame >= until {
			return i, until
		}
		if i >= renderDense && frame > at {
			return i, frame
		}
		o.engine.Send(e)
	}
	return len(events), until
}

// swap takes the patch of the Program Changes that are due on this step of the
// grid, on which alone the engine takes patches.
func (o *offline) swap(events []engine.Event, at int64) {
	for _, e := range events {
		due := onGrid(o.frame(e))
		if due > at {
			return
		}
		if e.Kind == engine.Program && due == at {
			if c := o.programs[int(e.Value)]; c != nil {
				o.engine.Swap(c)
			}
		}
	}
}

// nextSwap shortens a period that a Program Change falls into.
func (o *offline) nextSwap(events []engine.Event, at, until int64) int64 {
	for _, e := range events {
		due := onGrid(o.frame(e))
		if due >= until {
			return until
		}
		if e.Kind == engine.Program && due > at {
			return due
		}
	}
	return until
}

// onGrid is the last step of the engine's grid that is not after a frame.
func onGrid(frame int64) int64 { return frame - frame%voice.Grid }
