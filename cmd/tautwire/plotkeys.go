package main

import (
	"image/color"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"tautwire/config"
)

// of gives one value for each key.
func of(keys []keySound, value func(keySound) float64) []float64 {
	out := make([]float64, len(keys))
	for i, k := range keys {
		out[i] = value(k)
	}
	return out
}

// runs are points over the keys, cut where a zone ends and where there is no value.
func runs(patch *config.Patch, keys []keySound, value func(keySound) float64) []plotter.XYs {
	var out []plotter.XYs
	for _, z := range patch.Zones {
		var run plotter.XYs
		for _, k := range keys {
			if k.key < z.Low || k.key > z.High {
				continue
			}
			if v := value(k); !math.IsNaN(v) && !math.IsInf(v, 0) {
				run = append(run, plotter.XY{X: float64(k.key), Y: v})
			} else if len(run) > 0 {
				out, run = append(out, run), nil
			}
		}
		if len(run) > 0 {
			out = append(out, run)
		}
	}
	return out
}

// addLines draws runs as lines, and tells the legend once.
func addLines(f *frame, p *plot.Plot, name string, c color.Color, dashed bool, all []plotter.XYs) error {
	var thumb plot.Thumbnailer
	for _, run := range all {
		line, err := plotter.NewLine(run)
		if err != nil {
			return err
		}
		line.Color, line.Width = c, vg.Points(1.5)
		if dashed {
			line.Dashes = []vg.Length{4, 3}
		}
		p.Add(line)
		thumb = line
	}
	if thumb != nil {
		f.add(name, thumb)
	}
	return nil
}

// addDots draws runs as dots, and tells the legend if there is a name.
func addDots(f *frame, p *plot.Plot, name string, c color.Color, shape draw.GlyphDrawer, all []plotter.XYs) error {
	var points plotter.XYs
	for _, run := range all {
		points = append(points, run...)
	}
	if len(points) == 0 {
		return nil
	}
	dots, err := plotter.NewScatter(points)
	if err != nil {
		return err
	}
	dots.Color, dots.Radius, dots.Shape = c, vg.Points(3), shape
	p.Add(dots)
	if name != "" {
		f.add(name, dots)
	}
	return nil
}

func drawDecay(c draw.Canvas, patch *config.Patch, keys []keySound) error {
	asked := func(k keySound) float64 { return k.values.Decay }
	second := func(k keySound) float64 { return k.second }
	measured := func(k keySound) float64 { return k.decay }
	low, high := logRange(append(append(of(keys, asked), of(keys, second)...), of(keys, measured)...))
	p, err := newKeyAxes(patch, low, high)
	if err != nil {
		return err
	}
	p.Y.Scale, p.Y.Tick.Marker = plot.LogScale{}, logTicks{}
	f := &frame{title: patch.Title + ": how long each key rings", unit: "seconds to fall by 60 dB"}
	if err := addLines(f, p, "asked for", colours().ink, false, runs(patch, keys, asked)); err != nil {
		return err
	}
	if err := addLines(f, p, "asked for in the second plane", colours().ink, true, runs(patch, keys, second)); err != nil {
		return err
	}
	if err := addDots(f, p, "measured at the fundamental", colours().blue, draw.CircleGlyph{}, runs(patch, keys, measured)); err != nil {
		return err
	}
	p.Draw(f.draw(c))
	return nil
}

func drawBrightness(c draw.Canvas, patch *config.Patch, keys []keySound) error {
	pitch := func(k keySound) float64 { return k.pitch }
	bright := func(k keySound) float64 { return k.bright }
	later := func(k keySound) float64 { return k.brightLater }
	low, high := logRange(append(append(of(keys, pitch), of(keys, bright)...), of(keys, later)...))
	p, err := newKeyAxes(patch, low, high)
	if err != nil {
		return err
	}
	p.Y.Scale, p.Y.Tick.Marker = plot.LogScale{}, logTicks{}
	f := &frame{title: patch.Title + ": how bright each key is", unit: "Hz, the centre of the spectrum"}
	if err := addLines(f, p, "the fundamental", colours().grey, true, runs(patch, keys, pitch)); err != nil {
		return err
	}
	for _, l := range []struct {
		name  string
		c     color.Color
		shape draw.GlyphDrawer
		value func(keySound) float64
	}{
		{"at the stroke", colours().orange, draw.PyramidGlyph{}, bright},
		{"a second later", colours().blue, draw.CircleGlyph{}, later},
	} {
		if err := addDots(f, p, l.name, l.c, l.shape, runs(patch, keys, l.value)); err != nil {
			return err
		}
	}
	p.Draw(f.draw(c))
	return nil
}

func drawPitch(c draw.Canvas, patch *config.Patch, keys []keySound) error {
	flat := func(k keySound) float64 { return k.flat }
	sharp := func(k keySound) float64 { return k.sharp }
	onset := func(k keySound) float64 {
		if k.values.Tension == 0 {
			return math.NaN()
		}
		return k.onset
	}
	tense, spread := false, false
	reach := 0.1 // cents: what lies nearer is shown as in tune
	var settled plotter.XYs
	for _, k := range keys {
		tense = tense || k.values.Tension > 0
		spread = spread || k.flat != 0 || k.sharp != 0
		for _, v := range append([]float64{k.flat, k.sharp}, k.settled...) {
			reach = max(reach, math.Abs(v))
		}
		if k.values.Tension > 0 && !math.IsNaN(k.onset) {
			reach = max(reach, math.Abs(k.onset))
		}
		for _, v := range k.settled {
			settled = append(settled, plotter.XY{X: float64(k.key), Y: v})
		}
	}
	reach = roundLog(reach*1.1, 1)
	p, err := newKeyAxes(patch, -reach, reach)
	if err != nil {
		return err
	}
	p.Y.Tick.Marker = plot.ConstantTicks(centTicks(reach))
	f := &frame{title: patch.Title + ": how true each key is", unit: "cents from its pitch"}
	if spread {
		if err := addBands(f, p, "where the key's strings are tuned", runs(patch, keys, flat), runs(patch, keys, sharp)); err != nil {
			return err
		}
	}
	if tense {
		if err := addDots(f, p, "at the stroke", colours().orange, draw.PyramidGlyph{}, runs(patch, keys, onset)); err != nil {
			return err
		}
	}
	if err := addDots(f, p, "as it dies away", colours().blue, draw.CircleGlyph{}, []plotter.XYs{settled}); err != nil {
		return err
	}
	p.Draw(f.draw(c))
	return nil
}

// centTicks go from -reach to +reach.
func centTicks(reach float64) []plot.Tick {
	var ticks []plot.Tick
	for i := -4; i <= 4; i++ {
		v := reach * float64(i) / 4
		t := plot.Tick{Value: v}
		if i%2 == 0 {
			t.Label = plainly(v)
			if v > 0 {
				t.Label = "+" + t.Label
			}
		}
		ticks = append(ticks, t)
	}
	return ticks
}

// addBands fills what lies between two runs.
func addBands(f *frame, p *plot.Plot, name string, low, high []plotter.XYs) error {
	var thumb plot.Thumbnailer
	for i := range low {
		around := append(plotter.XYs{}, low[i]...)
		for j := len(high[i]) - 1; j >= 0; j-- {
			around = append(around, high[i][j])
		}
		band, err := plotter.NewPolygon(around)
		if err != nil {
			return err
		}
		band.Color = color.Gray{190}
		band.LineStyle.Color, band.LineStyle.Width = color.Gray{190}, vg.Points(1)
		p.Add(band)
		thumb = band
	}
	if thumb != nil {
		f.add(name, thumb)
	}
	return nil
}
