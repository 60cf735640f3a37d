package main

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"sync"
	"syscall"
	"time"

	"github.com/rs/zerolog"

	"tautwire/config"
	"tautwire/engine"
	"tautwire/engine/output"
	"tautwire/midiin"
)

const (
	// fadeMost is how long a stop waits for the last notes to fade.
	fadeMost = 600 * time.Millisecond
	// ringMost is how long the demo's last notes may ring.
	ringMost = 20 * time.Second
	// lookEvery is how often playing looks after itself.
	lookEvery = 50 * time.Millisecond
	// settleMost is how long the start waits to learn what its thread was granted.
	settleMost = 500 * time.Millisecond
)

// playOptions are what the command line asks of play.
type playOptions struct {
	patch, rig, device, timing, log string
	rate, period                    int
	midi                            []string
	demo, verbose                   bool
}

func playCommand() command {
	return command{
		name:  "play",
		brief: "play, from every keyboard there is",
		about: `
Plays the instrument: on the best audio output, from every keyboard, with the
built-in patches, until Ctrl-C or SIGTERM. Options say otherwise, and stand
above what a rig file says. A second Ctrl-C ends it without the fade.

Patches and rigs are looked for as named, then in $XDG_CONFIG_HOME/tautwire,
in /etc/tautwire, and among the built-in ones.`,
		prepare: func(o *options) func(context.Context, streams, []string) error {
			var p playOptions
			o.StringVar(&p.patch, "patch", "", "`FILE` or name of the patch to play")
			o.StringVar(&p.rig, "rig", "", "`FILE` with devices, keyboards and the set of patches for Program Change")
			o.StringVar(&p.device, "device", "", "audio output with `NAME` in its own or its host's name, see `tautwire devices`; null is silent")
			rate := o.whole("rate", 8000, 192000, "`HZ` of the output (default 48000, or what the device has)")
			period := o.whole("period", 16, 4096, "`FRAMES` rendered at once: few answer fast, many are safe (default 64)")
			timing := o.choice("timing", "", "`WORD`: steady has every note equally late, eager each as soon as can be (default steady)", "steady", "eager")
			midi := o.list("midi", "keyboard with `NAME` in its name, or the path of a byte stream; may be repeated (default every one)")
			o.BoolVar(&p.demo, "demo", false, "play the demo performance, and end after it")
			o.StringVar(&p.log, "log", "", "`FILE` that the log is added to, for `tautwire report`")
			o.BoolVar(&p.verbose, "verbose", false, "show all records of the log, each MIDI event, and what sound libraries say")
			return func(ctx context.Context, s streams, args []string) error {
				if len(args) > 0 {
					return usageError{fmt.Sprintf("play: %q is no option; see `tautwire play --help`", args[0])}
				}
				p.rate, p.period, p.timing, p.midi = *rate, *period, *timing, *midi
				return play(ctx, &lockedWriter{w: s.err}, p)
			}
		},
	}
}

// lockedWriter lets several goroutines write whole lines.
type lockedWriter struct {
	mu sync.Mutex
	w  io.Writer
}

func (l *lockedWriter) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.w.Write(p)
}

// load gives the rig that the options and the rig file ask for together, and
// the patch to begin with.
func (p *playOptions) load() (rig *config.Rig, first *config.Patch, err error) {
	if p.patch != "" {
		if first, err = config.LoadPatch(p.patch); err != nil {
			return nil, nil, inOneLine(err)
		}
	}
	switch {
	case p.rig != "":
		rig, err = config.LoadRig(p.rig)
	case first != nil:
		rig = config.PlainRig(first)
	default:
		var all []*config.Patch
		if all, err = builtins(); err == nil {
			rig = config.PlainRig(all[0])
			rig.Set = all
		}
	}
	if err != nil {
		return nil, nil, inOneLine(err)
	}
	if first == nil {
		first = rig.Set[0]
	}
	a := &rig.Audio
	a.Device = cmp.Or(p.device, a.Device)
	a.Rate = cmp.Or(p.rate, a.Rate)
	a.Period = cmp.Or(p.period, a.Period)
	a.Timing = cmp.Or(p.timing, a.Timing)
	if len(p.midi) > 0 {
		rig.MIDI.Inputs = p.midi
	}
	return rig, first, nil
}

// player is all that plays, wired up.
type player struct {
	options  playOptions
	rig      *config.Rig
	first    *config.Patch
	journal  *journal
	process  output.Process
	set      *set
	engine   *engine.Engine
	player   *engine.Player
	output   output.Output
	choice   output.Choice
	merger   *midiin.Merger
	keys     *keyboards
	demo     *midiin.Performance
	received chan engine.Event // for the log, when verbose
	changes  chan change       // for the log
}

func play(ctx context.Context, screen io.Writer, o playOptions) error {
	signals := make(chan os.Signal, 2)
	signal.Notify(signals, os.Interrupt, syscall.SIGTERM, syscall.SIGHUP)
	defer signal.Stop(signals)
	// A reader of our messages that goes away is no reason to fall silent.
	signal.Ignore(syscall.SIGPIPE)

	rig, first, err := o.load()
	if err != nil {
		return err
	}
	p := &player{options: o, rig: rig, first: first}
	if p.journal, err = newJournal(o.log, screen, o.verbose); err != nil {
		return err
	}
	defer p.journal.close()
	if p.keys, err = newKeyboards(rig.MIDI.Inputs, p.journal, o.verbose); err != nil {
		return err
	}
	if o.demo {
		if p.demo, err = midiin.Demo(); err != nil {
			return err
		}
	}
	p.process = output.PrepareProcess()
	if err := p.wire(&output.System{Verbose: o.verbose}); err != nil {
		return err
	}
	return p.run(ctx, screen, signals)
}

// wire makes the engine for what the device takes, and all that leads to it.
func (p *player) wire(system *output.System) error {
	a := p.rig.Audio
	var err error
	if p.choice, err = system.Choose(a.Device, a.Rate, a.Period); err != nil {
		var none *output.NoDeviceError
		if errors.As(err, &none) && none.Asked != "" {
			return fmt.Errorf("%w; `tautwire devices` tells more", err)
		}
		return err
	}
	var first *engine.Compiled
	if p.set, first, err = newSet(p.first, p.rig.Set, p.choice.Rate, p.changed); err != nil {
		return err
	}
	timing := engine.Steady
	if a.Timing == "eager" {
		timing = engine.Eager
	}
	p.engine = engine.New(first, engine.Options{
		Rate: p.choice.Rate, Period: p.choice.Period, Timing: timing, Voices: a.Strings,
	})
	p.set.swap = p.engine.Swap
	p.engine.SetVolume(a.Level)
	p.player = engine.NewPlayer(p.engine, p.choice.Rate)
	p.output = system.Open(p.choice, p.player, p.befell)
	p.received = make(chan engine.Event, 1024)
	p.changes = make(chan change, 64)
	p.merger = midiin.NewMerger(p.send, p.rig.MIDI.Channels, engine.Now)
	return nil
}

// send is the merger's way to the engine. A Program Change swaps the patch here
// and now, so that the next note has it already.
func (p *player) send(e engine.Event) bool {
	if p.options.verbose {
		select {
		case p.received <- e:
		default: // the log may have gaps, the notes not
		}
	}
	if e.Kind == engine.Program {
		p.set.take(int(e.Value))
	}
	return p.engine.Send(e)
}

// changed has a Program Change told, by another goroutine than the one that
// plays.
func (p *player) changed(c change) {
	select {
	case p.changes <- c:
	default:
	}
}

// befell tells of what the output went through.
func (p *player) befell(n output.Notice) {
	level, says := zerolog.WarnLevel, ""
	switch n.Happening {
	case output.Lost:
		says = n.Device + " is gone; playing goes on when it is back"
		if n.Err != nil {
			says = fmt.Sprintf("%s is not to be had (%v); it is tried again", n.Device, n.Err)
		}
	case output.Regained:
		level = zerolog.InfoLevel
		says = fmt.Sprintf("%s plays again, after %.1f s", n.Device, n.Took.Seconds())
	case output.Restarted:
		level = zerolog.ErrorLevel
		says = fmt.Sprintf("a fault in the program (%s) cost %.0f ms of sound; please report it with the log", n.Reason, n.Took.Seconds()*1e3)
	case output.SilentForGood:
		level = zerolog.ErrorLevel
		says = fmt.Sprintf("faults in the program came too often (%s): silent from now on; start it again, and please report it with the log", n.Reason)
	}
	e := p.journal.tell(level, "device").
		Str("what", string(n.Happening)).
		Str("device", n.Device).
		Float64("took_us", microseconds(n.Took.Nanoseconds())).
		Err(n.Err)
	if n.Reason != "" {
		e = e.Str("reason", n.Reason).Str("stack", string(n.Stack))
	}
	e.Msg(says)
}

// run plays until a signal, the end of ctx, or the end of the demo.
func (p *player) run(ctx context.Context, screen io.Writer, signals <-chan os.Signal) error {
	if err := p.output.Start(); err != nil {
		return err
	}
	info := p.settle()
	p.introduce(screen, info)
	p.logStart(info)

	// The keyboards fall silent first, then the sound, and the log last.
	logging, endLog := context.WithCancel(context.WithoutCancel(ctx))
	listening, endKeys := context.WithCancel(ctx)
	var loggers, players sync.WaitGroup
	gauge := &gauge{journal: p.journal, rate: p.choice.Rate, ring: p.player.Measures(), counts: p.engine.Counts}
	loggers.Go(func() { gauge.run(logging) })
	loggers.Go(func() { p.logEvents(logging) })
	players.Go(func() { p.keys.run(listening, p.merger) })
	go func() {
		if err := p.set.compileRest(listening); err != nil {
			p.journal.tell(zerolog.ErrorLevel, "patch").Str("what", "failed").Err(err).Msg(err.Error())
		}
		p.process.Settle()
	}()
	var ended chan struct{}
	if p.demo != nil {
		ended = make(chan struct{})
		players.Go(func() {
			defer close(ended)
			midiin.Play(listening, p.demo, p.merger.Open(p.demo.Name))
		})
	}

	p.wait(ctx, signals, ended)
	endKeys()
	atOnce := p.fade(signals)
	if !atOnce {
		players.Wait()
	}
	err := p.output.Stop()
	endLog()
	loggers.Wait()
	p.journal.keep(zerolog.InfoLevel, "stop").Send()
	return err
}

// settle waits a little for the first callback, which knows what its thread was
// granted.
func (p *player) settle() output.Info {
	for begin := time.Now(); time.Since(begin) < settleMost; time.Sleep(time.Millisecond) {
		if info := p.output.Info(); info.Scheduling.Class != "" {
			return info
		}
	}
	return p.output.Info()
}

// wait returns when there is a reason to stop.
func (p *player) wait(ctx context.Context, signals <-chan os.Signal, ended <-chan struct{}) {
	select {
	case <-ctx.Done():
		return
	case <-signals:
		return
	case <-ended: // never, without a demo
	}
	tick := time.NewTicker(lookEvery)
	defer tick.Stop()
	for begin := time.Now(); time.Since(begin) < ringMost && p.engine.Counts().Strings > 0; {
		select {
		case <-ctx.Done():
			return
		case <-signals:
			return
		case <-tick.C:
		}
	}
}

// fade lets the last notes fade, and tells whether a second signal cut it short.
func (p *player) fade(signals <-chan os.Signal) (atOnce bool) {
	p.engine.Quiet()
	tick := time.NewTicker(5 * time.Millisecond)
	defer tick.Stop()
	for begin := time.Now(); time.Since(begin) < fadeMost && !p.engine.Faded(); {
		select {
		case <-signals:
			return true
		case <-tick.C:
		}
	}
	// What has been rendered last is still on its way to the loudspeaker.
	pause(context.Background(), min(p.output.Info().Latency, fadeMost/3))
	return false
}

// logEvents tells of Program Changes and, when verbose, of all that the
// keyboards send. Who plays never waits for it.
func (p *player) logEvents(ctx context.Context) {
	for {
		select {
		case c := <-p.changes:
			p.set.log(c, p.journal)
		case e := <-p.received:
			p.journal.keep(zerolog.DebugLevel, "midi").
				Str("kind", kindName(e.Kind)).
				Uint8("channel", e.Channel+1).
				Uint8("key", e.Key).
				Float32("value", e.Value).
				Float64("at_us", microseconds(e.Time)).
				Send()
		case <-ctx.Done():
			return
		}
	}
}

// introduce says what is played on, with which latency, and who listens.
func (p *player) introduce(screen io.Writer, info output.Info) {
	ms := func(frames int) float64 { return 1e3 * float64(frames) / float64(info.Rate) }
	fmt.Fprintf(screen, "Tautwire %s plays %q", version, p.first.Title)
	if n := len(p.rig.Set); n > 1 {
		fmt.Fprintf(screen, "; Program Change takes another of %d patches", n)
	}
	fmt.Fprintln(screen)
	fmt.Fprintf(screen, "on %s, %d Hz, periods of %d frames", describeDevice(info.Device, info.Host), info.Rate, info.Period)
	if a := p.rig.Audio; info.Rate != a.Rate || info.Period != a.Period {
		fmt.Fprintf(screen, " (its own; %d Hz and %d frames are not to be had)", a.Rate, a.Period)
	}
	fmt.Fprintln(screen)
	steady := ms(p.engine.Delay())
	if p.rig.Audio.Timing != "eager" {
		steady += ms(info.Period)
	}
	fmt.Fprintf(screen, "%.1f ms from a key to the output, which adds %.1f ms of its own\n", steady, 1e3*info.Latency.Seconds())
	fmt.Fprintf(screen, "at %s dB of what the output gives. Begin with the loudspeakers turned down: loud sound damages hearing.\n", plainly(p.rig.Audio.Level))
	for _, refusal := range p.refusals(info) {
		p.journal.tell(zerolog.WarnLevel, "refused").Str("what", refusal.What).Err(refusal.Err).Msg(refusal.String())
	}
	if p.demo != nil {
		fmt.Fprintf(screen, "Playing the demo, %q, %s\n", p.demo.Name, p.demo.End.Round(time.Second))
	}
}

func (p *player) refusals(info output.Info) []output.Refusal {
	all := p.process.Refusals
	if r := info.Scheduling.Refusal; r != nil {
		all = append(all, *r)
	}
	return all
}

func describeDevice(device, host string) string {
	if device == "null" {
		return "the null output, which is silent"
	}
	return fmt.Sprintf("%s (%s)", device, host)
}

func (p *player) logStart(info output.Info) {
	p.journal.keep(zerolog.InfoLevel, "start").
		Str("version", version).
		Str("patch", p.first.Path).
		Str("device", info.Device).
		Str("host", info.Host).
		Int("rate", info.Rate).
		Int("period", info.Period).
		Str("timing", cmp.Or(p.rig.Audio.Timing, "steady")).
		Float64("latency_us", microseconds(info.Latency.Nanoseconds())).
		Str("scheduling", info.Scheduling.Class).
		Int("priority", info.Scheduling.Priority).
		Bool("memory_locked", p.process.Locked).
		Int("procs", p.process.Procs).
		Send()
}

// kindName is a kind of event in the words of the log.
func kindName(k engine.Kind) string {
	names := map[engine.Kind]string{
		engine.NoteOn: "note on", engine.NoteOff: "note off", engine.Control: "control", engine.Bend: "bend",
		engine.KeyPressure: "key pressure", engine.ChannelPressure: "channel pressure", engine.Program: "program",
		engine.Tune: "tune", engine.Shift: "shift", engine.AllSoundOff: "all sound off",
		engine.AllNotesOff: "all notes off", engine.ResetControllers: "reset controllers",
	}
	return cmp.Or(names[k], fmt.Sprintf("kind %d", k))
}
