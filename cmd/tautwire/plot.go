package main

import (
	"context"
	"fmt"
	"image/color"
	"math"
	"os"
	"path/filepath"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"

	"tautwire/config"
	"tautwire/engine"
	"tautwire/voice/measure"
)

const (
	plotRate    = 48000 // Hz
	plotSeconds = 2.0   // of each key
	plotStep    = 3     // keys from one that is measured to the next
)

// The colours are told apart by colour-blind eyes too: Okabe and Ito, "Color
// Universal Design", 2008.
var (
	plotBlue   = color.RGBA{0, 114, 178, 255}
	plotOrange = color.RGBA{213, 94, 0, 255}
	plotGreen  = color.RGBA{0, 158, 115, 255}
)

// sounded is one key as the patch sounds it.
type sounded struct {
	key            int
	pitch          float64 // Hz that is asked for
	decay          float64 // s that is asked for
	cents, t60     float64 // measured at the fundamental; NaN where nothing could be
	bright, darker float64 // Hz: the spectrum's centre at the stroke and a second later
	note           []float32
}

// plotPatch draws a patch's pictures into a folder and returns their paths: decay, brightness and
// pitch over the keys, and the spectra of a low, a middle and a high one. Every number in them
// is measured on what the engine renders.
//
// # Errors
//
// A patch that cannot be read, and a folder or a file that cannot be written.
func plotPatch(ctx context.Context, s streams, dir, name string) ([]string, error) {
	patch, err := config.LoadPatch(name)
	if err != nil {
		return nil, err
	}
	keys, err := soundKeys(ctx, s, patch)
	if err != nil {
		return nil, err
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, fmt.Errorf("check: %w; name a folder that can be written", err)
	}
	var paths []string
	for _, picture := range []struct {
		file string
		draw func(*config.Patch, []sounded) (*plot.Plot, error)
	}{
		{"decay.svg", plotDecay}, {"brightness.svg", plotBrightness}, {"spectrum.svg", plotSpectrum}, {"pitch.svg", plotPitch},
	} {
		p, err := picture.draw(patch, keys)
		if err != nil {
			return paths, fmt.Errorf("check: %s: %w", picture.file, err)
		}
		path := filepath.Join(dir, picture.file)
		if err := p.Save(22*vg.Centimeter, 12*vg.Centimeter, path); err != nil {
			return paths, fmt.Errorf("check: %w; name a folder that can be written", err)
		}
		paths = append(paths, path)
	}
	return paths, nil
}

// plotPatches draws each patch, into a folder of its own where there are several, and
// prints the paths.
func plotPatches(ctx context.Context, s streams, dir string, names []string) error {
	for _, name := range names {
		folder := dir
		if len(names) > 1 {
			folder = filepath.Join(dir, strings.TrimSuffix(filepath.Base(name), ".toml"))
		}
		paths, err := plotPatch(ctx, s, folder, name)
		if err != nil {
			return err
		}
		for _, path := range paths {
			fmt.Fprintln(s.out, path)
		}
	}
	return nil
}

// soundKeys plays every third key of a patch, alone, and measures it.
func soundKeys(ctx context.Context, s streams, patch *config.Patch) ([]sounded, error) {
	compiled, err := engine.Compile(patch, plotRate)
	if err != nil {
		return nil, err
	}
	bar := newProgress(s.err, "measuring", 128/plotStep)
	defer bar.done()
	var keys []sounded
	for key := 0; key < 128; key += plotStep {
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		bar.add(1)
		zone, ok := patch.Zone(key)
		if !ok {
			continue
		}
		k := sounded{key: key, decay: zone.At(key).Decay}
		k.pitch = patch.Tuning.A4 * math.Exp2((float64(key-69)+patch.Tuning.Cents[key%12]/100)/12)
		k.note = playAlone(compiled, key)
		k.measure()
		keys = append(keys, k)
	}
	if len(keys) == 0 {
		return nil, fmt.Errorf("check: %s has none of the keys that are measured, every third from C-1; widen a zone", patch.Path)
	}
	return keys, nil
}

// playAlone renders one key, held, both sides added.
func playAlone(compiled *engine.Compiled, key int) []float32 {
	e := engine.New(compiled, engine.Options{Rate: plotRate, Timing: engine.Offline, Voices: 8})
	e.Send(engine.Event{Kind: engine.NoteOn, Key: uint8(key), Value: 100})
	out := make([]float32, 2*int(plotSeconds*plotRate))
	e.Render(out)
	note := make([]float32, len(out)/2)
	for i := range note {
		note[i] = (out[2*i] + out[2*i+1]) / 2
	}
	return note
}

func (k *sounded) measure() {
	k.cents, k.t60, k.bright, k.darker = math.NaN(), math.NaN(), math.NaN(), math.NaN()
	late := k.note[int(0.15*plotRate):]
	if m, err := measure.Partial(late, plotRate, k.pitch, k.pitch); err == nil && m.T60 > 0 {
		k.cents, k.t60 = measure.Cents(m.Frequency, k.pitch), m.T60
	}
	k.bright = centre(k.note[:plotRate/2])
	k.darker = centre(k.note[plotRate : 3*plotRate/2])
}

// centre is a spectrum's mean frequency by power, in Hz, or NaN for silence.
func centre(part []float32) float64 {
	spectrum := measure.NewSpectrum(part, plotRate)
	sum, all := 0.0, 0.0
	for i, db := range spectrum.DB {
		if p := math.Pow(10, db/10); p > 1e-16 {
			sum += p * float64(i) * spectrum.Step
			all += p
		}
	}
	if all == 0 {
		return math.NaN()
	}
	return sum / all
}

// keyed makes points over the keys, leaving out what could not be measured.
func keyed(keys []sounded, value func(sounded) float64) plotter.XYs {
	var out plotter.XYs
	for _, k := range keys {
		if v := value(k); !math.IsNaN(v) && !math.IsInf(v, 0) {
			out = append(out, plotter.XY{X: float64(k.key), Y: v})
		}
	}
	return out
}

// keyTicks names the Cs.
type keyTicks struct{}

func (keyTicks) Ticks(low, high float64) []plot.Tick {
	var ticks []plot.Tick
	for key := 0; key < 128; key += 12 {
		if float64(key) >= low && float64(key) <= high {
			ticks = append(ticks, plot.Tick{Value: float64(key), Label: config.KeyName(key)})
		}
	}
	return ticks
}

func newKeyPlot(patch *config.Patch, what, y string) *plot.Plot {
	p := plot.New()
	p.Title.Text = patch.Title + ": " + what
	p.X.Label.Text, p.Y.Label.Text = "key", y
	p.X.Tick.Marker = keyTicks{}
	p.X.Min, p.X.Max = 0, 127
	p.Legend.Top = true
	p.Add(plotter.NewGrid())
	return p
}

func addLine(p *plot.Plot, name string, c color.Color, points plotter.XYs) error {
	if len(points) == 0 {
		return nil
	}
	line, err := plotter.NewLine(points)
	if err != nil {
		return err
	}
	line.Color, line.Width = c, vg.Points(1.5)
	p.Add(line)
	p.Legend.Add(name, line)
	return nil
}

func addDots(p *plot.Plot, name string, c color.Color, points plotter.XYs) error {
	if len(points) == 0 {
		return nil
	}
	dots, err := plotter.NewScatter(points)
	if err != nil {
		return err
	}
	dots.Color, dots.Radius = c, vg.Points(2.5)
	p.Add(dots)
	p.Legend.Add(name, dots)
	return nil
}

func plotDecay(patch *config.Patch, keys []sounded) (*plot.Plot, error) {
	p := newKeyPlot(patch, "how long each key rings", "time to fall by 60 dB, s")
	p.Y.Scale, p.Y.Tick.Marker = plot.LogScale{}, plot.LogTicks{Prec: -1}
	if err := addLine(p, "asked for", plotBlue, keyed(keys, func(k sounded) float64 { return k.decay })); err != nil {
		return nil, err
	}
	return p, addDots(p, "measured at the fundamental", plotOrange, keyed(keys, func(k sounded) float64 { return k.t60 }))
}

func plotBrightness(patch *config.Patch, keys []sounded) (*plot.Plot, error) {
	p := newKeyPlot(patch, "how bright each key is", "middle of the spectrum, Hz")
	p.Y.Scale, p.Y.Tick.Marker = plot.LogScale{}, plot.LogTicks{Prec: -1}
	p.Legend.Left = true
	if err := addLine(p, "at the stroke", plotOrange, keyed(keys, func(k sounded) float64 { return k.bright })); err != nil {
		return nil, err
	}
	if err := addLine(p, "a second later", plotBlue, keyed(keys, func(k sounded) float64 { return k.darker })); err != nil {
		return nil, err
	}
	return p, addLine(p, "the fundamental", plotGreen, keyed(keys, func(k sounded) float64 { return k.pitch }))
}

func plotPitch(patch *config.Patch, keys []sounded) (*plot.Plot, error) {
	p := newKeyPlot(patch, "how far each key is from its pitch", "cents")
	p.Y.Min, p.Y.Max = -0.01, 0.01
	return p, addDots(p, "measured; strings of a course and planes apart show as themselves", plotOrange, keyed(keys, func(k sounded) float64 { return k.cents }))
}

func plotSpectrum(patch *config.Patch, keys []sounded) (*plot.Plot, error) {
	p := plot.New()
	p.Title.Text = patch.Title + ": the spectrum of three keys, the first half second"
	p.X.Label.Text, p.Y.Label.Text = "frequency, Hz", "level, dB"
	p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, plot.LogTicks{Prec: -1}
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = 20, 20000, -120, 0
	p.Legend.Top = true
	p.Add(plotter.NewGrid())
	colours := []color.Color{plotBlue, plotGreen, plotOrange}
	for i, at := range []int{len(keys) / 4, len(keys) / 2, 3 * len(keys) / 4} {
		spectrum := measure.NewSpectrum(keys[at].note[:plotRate/2], plotRate)
		var points plotter.XYs
		for bin, db := range spectrum.DB {
			if hz := float64(bin) * spectrum.Step; hz >= 20 && hz <= 20000 {
				points = append(points, plotter.XY{X: hz, Y: max(db, -120)})
			}
		}
		if err := addLine(p, config.KeyName(keys[at].key), colours[i], points); err != nil {
			return nil, err
		}
	}
	return p, nil
}
