package main

import (
	"fmt"
	"math"
	"slices"
	"strconv"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"tautwire/config"
	"tautwire/voice/measure"
)

// What a spectrum shows.
const (
	spectrumLow   = 20.0 // Hz
	spectrumHigh  = 20000.0
	spectrumDepth = 90.0 // dB from top to bottom

	nameRoom = 16.0 // dB above the highest partial, for the key's name
)

// threeKeys are a low, a middle and a high one, of a piano's keys where the patch has such.
func threeKeys(keys []keySound) []keySound {
	const lowest, highest = 21, 108
	usual := slices.DeleteFunc(slices.Clone(keys), func(k keySound) bool { return k.key < lowest || k.key > highest })
	if len(usual) == 0 {
		usual = keys
	}
	last := len(usual) - 1
	at := []int{last / 6, last / 2, last - last/6}
	var out []keySound
	for _, i := range slices.Compact(at) {
		out = append(out, usual[i])
	}
	return out
}

// drawSpectra draws three keys, one below the other.
func drawSpectra(c draw.Canvas, patch *config.Patch, keys []keySound) error {
	three := threeKeys(keys)
	top := math.Inf(-1)
	for _, k := range three {
		_, peak := k.stroke.Peak(spectrumLow, spectrumHigh)
		top = max(top, peak)
	}
	if math.IsInf(top, -1) {
		top = 0 // all are silent
	}
	top = 10 * math.Ceil((top+nameRoom)/10)
	f := &frame{title: patch.Title + ": the partials of a low, a middle and a high key", unit: "dB from full scale"}
	var rows [][]*plot.Plot
	for i, k := range three {
		entries := f
		if i > 0 {
			entries = &frame{} // the legend has it all
		}
		p, err := spectrumOf(entries, k, top)
		if err != nil {
			return err
		}
		if i == len(three)-1 {
			p.X.Label.Text = "frequency, Hz"
		}
		rows = append(rows, []*plot.Plot{p})
	}
	c = f.draw(c)
	tiles := draw.Tiles{Rows: len(rows), Cols: 1, PadY: 10}
	for i, row := range plot.Align(rows, tiles, c) {
		rows[i][0].Draw(row[0])
	}
	return nil
}

// spectrumOf draws one key at its stroke and a second later, its partials numbered.
func spectrumOf(f *frame, k keySound, top float64) (*plot.Plot, error) {
	p := newAxes("")
	p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, logTicks{}
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = spectrumLow, spectrumHigh, top-spectrumDepth, top
	p.Y.Tick.Marker = plot.ConstantTicks(levelTicks(p.Y.Min, p.Y.Max))
	addGrid(p)
	if err := addLines(f, p, "at the stroke", colours().orange, false, outline(k.stroke, p.Y.Min)); err != nil {
		return nil, err
	}
	if err := addLines(f, p, "a second later", colours().blue, false, outline(k.later, p.Y.Min)); err != nil {
		return nil, err
	}
	marks := partials(k, p.Y.Min)
	if err := addDots(f, p, "partials, by their numbers", colours().ink, draw.CircleGlyph{}, []plotter.XYs{marks.XYs}); err != nil {
		return nil, err
	}
	if len(marks.XYs) > 0 {
		numbers, err := plotter.NewLabels(marks)
		if err != nil {
			return nil, err
		}
		numbers.Offset.Y = 5
		for i := range numbers.TextStyle {
			numbers.TextStyle[i] = writing(9, colours().ink)
			numbers.TextStyle[i].XAlign = draw.XCenter
		}
		p.Add(numbers)
	}
	name, err := plotter.NewLabels(plotter.XYLabels{
		XYs:    plotter.XYs{{X: spectrumLow, Y: top}},
		Labels: []string{fmt.Sprintf("%s, %s Hz", config.KeyName(k.key), strconv.FormatFloat(k.pitch, 'f', max(0, 2-int(math.Log10(k.pitch))), 64))},
	})
	if err != nil {
		return nil, err
	}
	name.TextStyle[0] = writing(13, colours().ink)
	name.TextStyle[0].YAlign = draw.YTop
	name.Offset = vg.Point{X: 6, Y: -3}
	p.Add(name)
	return p, nil
}

// levelTicks are 20 dB apart.
func levelTicks(low, high float64) []plot.Tick {
	const step = 20
	var ticks []plot.Tick
	for v := step * math.Ceil(low/step); v <= high; v += step {
		ticks = append(ticks, plot.Tick{Value: v, Label: plainly(v)})
	}
	return ticks
}

// outline is a spectrum as its highest points, as fine as can be seen, where it stands above the floor.
func outline(s measure.Spectrum, floor float64) []plotter.XYs {
	const columns = 1600
	var points plotter.XYs
	column := -1
	for i, level := range s.DB {
		hz := float64(i) * s.Step
		if hz < spectrumLow || hz > spectrumHigh {
			continue
		}
		level = max(level, floor)
		at := int(columns * math.Log(hz/spectrumLow) / math.Log(spectrumHigh/spectrumLow))
		if at != column {
			column = at
			points = append(points, plotter.XY{X: hz, Y: level})
		} else if last := &points[len(points)-1]; level > last.Y {
			*last = plotter.XY{X: hz, Y: level}
		}
	}
	var out []plotter.XYs
	from := 0
	for i := range points {
		switch low := points[i].Y <= floor; {
		case low && i > from+1: // stood above since
			out = append(out, points[from:i+1])
			from = i
		case low:
			from = i
		case i == len(points)-1:
			out = append(out, points[from:])
		}
	}
	return out
}

// partials are the first partials that stand out at the stroke, numbered as far as there is
// room.
func partials(k keySound, floor float64) plotter.XYLabels {
	const last, numbered = 16, 8
	var out plotter.XYLabels
	b := k.values.Inharmonicity
	for n := 1.0; n <= last; n++ {
		hz := n * k.pitch * math.Sqrt((1+b*n*n)/(1+b))
		if hz < spectrumLow || hz > spectrumHigh {
			continue
		}
		at, level := k.stroke.Peak(hz-k.pitch/8, hz+k.pitch/8)
		if level < floor+3 {
			continue
		}
		label := ""
		if n <= numbered {
			label = strconv.Itoa(int(n))
		}
		out.XYs = append(out.XYs, plotter.XY{X: at, Y: level})
		out.Labels = append(out.Labels, label)
	}
	return out
}
