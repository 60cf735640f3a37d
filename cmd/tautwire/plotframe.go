package main

import (
	"image/color"
	"math"
	"strconv"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"tautwire/config"
)

// palette is told apart by colour-blind eyes too: Okabe and Ito, "Color Universal Design",
// 2008.
type palette struct{ blue, orange, ink, grey, pale, paler color.Color }

func colours() palette {
	return palette{
		blue: color.RGBA{0, 114, 178, 255}, orange: color.RGBA{213, 94, 0, 255},
		ink: color.Gray{40}, grey: color.Gray{120}, pale: color.Gray{222}, paler: color.Gray{244},
	}
}

// frame is a picture's title, its legend in one line below, and what the values are, above
// their axis.
type frame struct {
	title  string
	unit   string
	legend []legendEntry
}

type legendEntry struct {
	name  string
	thumb plot.Thumbnailer
}

func (f *frame) add(name string, thumb plot.Thumbnailer) {
	f.legend = append(f.legend, legendEntry{name, thumb})
}

// draw writes title and legend, and gives the room below them.
func (f *frame) draw(c draw.Canvas) draw.Canvas {
	const titleRoom, legendRoom, unitRoom, indent, thumb = 26, 22, 18, 4, 24
	title := writing(15, colours().ink)
	title.YAlign = draw.YTop
	c.FillText(title, vg.Point{X: c.Min.X + indent, Y: c.Max.Y}, f.title)
	c = draw.Crop(c, 0, 0, 0, -titleRoom)
	left := vg.Length(indent)
	for _, e := range f.legend {
		l := plot.NewLegend()
		l.Top, l.Left, l.TextStyle, l.ThumbnailWidth = true, true, writing(11, colours().ink), thumb
		l.Add(e.name, e.thumb)
		l.Draw(draw.Crop(c, left, 0, 0, 0))
		// Room to spare for a viewer's wider font.
		left += thumb + l.TextStyle.Width(e.name)*1.15 + thumb
	}
	if len(f.legend) > 0 {
		c = draw.Crop(c, 0, 0, 0, -legendRoom)
	}
	unit := writing(11, colours().grey)
	unit.YAlign = draw.YTop
	c.FillText(unit, vg.Point{X: c.Min.X + indent, Y: c.Max.Y}, f.unit)
	return draw.Crop(c, 0, 0, 0, -unitRoom)
}

// writing is text of a size in points.
func writing(points float64, c color.Color) draw.TextStyle {
	return draw.TextStyle{
		Color:   c,
		Font:    font.Font{Typeface: "Liberation", Variant: "Sans", Size: vg.Points(points)},
		Handler: plot.DefaultTextHandler,
	}
}

// newAxes is an empty plot, ready for its ranges.
func newAxes(x string) *plot.Plot {
	p := plot.New()
	ink := colours().ink
	p.X.Label.Text = x
	for _, a := range []*plot.Axis{&p.X, &p.Y} {
		label, tick := writing(12, ink), writing(11, ink)
		label.XAlign, tick.XAlign = a.Label.TextStyle.XAlign, a.Tick.Label.XAlign
		label.YAlign, tick.YAlign = a.Label.TextStyle.YAlign, a.Tick.Label.YAlign
		label.Rotation = a.Label.TextStyle.Rotation
		a.Label.TextStyle, a.Tick.Label = label, tick
		a.Label.Padding = 6
		a.LineStyle.Color, a.Tick.LineStyle.Color = ink, ink
	}
	return p
}

// newKeyAxes is a plot over the keys of a patch, its zones shaded and named, whose values go from
// low to high.
func newKeyAxes(patch *config.Patch, low, high float64) (*plot.Plot, error) {
	p := newAxes("key, each struck alone at velocity " + strconv.Itoa(plotVelocity) + " and held")
	first, last := patch.Zones[0].Low, patch.Zones[len(patch.Zones)-1].High
	p.X.Min, p.X.Max = float64(first)-1, float64(last)+1
	p.Y.Min, p.Y.Max = low, high
	p.X.Tick.Marker = keyTicks{}
	names := plotter.XYLabels{}
	for i, z := range patch.Zones {
		from, to := float64(z.Low)-0.5, float64(z.High)+0.5
		shade, err := plotter.NewPolygon(plotter.XYs{{X: from, Y: low}, {X: to, Y: low}, {X: to, Y: high}, {X: from, Y: high}})
		if err != nil {
			return nil, err
		}
		shade.Color, shade.LineStyle.Width = colours().paler, 0
		if i%2 == 1 {
			shade.Color = color.Gray{234}
		}
		p.Add(shade)
		if name := config.KeysName(z.Low, z.High); (to-from)/(p.X.Max-p.X.Min) > 0.012*float64(len(name)) {
			names.XYs = append(names.XYs, plotter.XY{X: (from + to) / 2, Y: high})
			names.Labels = append(names.Labels, name)
		}
	}
	addGrid(p)
	if len(names.Labels) == 0 {
		return p, nil
	}
	labels, err := plotter.NewLabels(names)
	if err != nil {
		return nil, err
	}
	labels.Offset.Y = -4
	for i := range labels.TextStyle {
		labels.TextStyle[i] = writing(10, colours().grey)
		labels.TextStyle[i].XAlign, labels.TextStyle[i].YAlign = draw.XCenter, draw.YTop
	}
	p.Add(labels)
	return p, nil
}

func addGrid(p *plot.Plot) {
	grid := plotter.NewGrid()
	grid.Vertical.Color, grid.Horizontal.Color = colours().pale, colours().pale
	p.Add(grid)
}

// keyTicks names keys: every C, or more of them where there is room.
type keyTicks struct{}

func (keyTicks) Ticks(low, high float64) []plot.Tick {
	step := 12
	switch span := high - low; {
	case span <= 14:
		step = 1
	case span <= 30:
		step = 4
	}
	var ticks []plot.Tick
	for key := 0; key < 128; key += step {
		if float64(key) >= low && float64(key) <= high {
			ticks = append(ticks, plot.Tick{Value: float64(key), Label: config.KeyName(key)})
		}
	}
	return ticks
}

// logTicks names 1, 2 and 5 of each decade, or 1 alone where there are many.
type logTicks struct{}

func (logTicks) Ticks(low, high float64) []plot.Tick {
	const many = 3.1 // decades
	var ticks []plot.Tick
	for decade := math.Floor(math.Log10(low)); decade <= math.Log10(high); decade++ {
		for m := 1.0; m < 10; m++ {
			v := m * math.Pow(10, decade)
			if v < low*(1-1e-9) || v > high*(1+1e-9) {
				continue
			}
			t := plot.Tick{Value: v}
			if m == 1 || (m == 2 || m == 5) && math.Log10(high/low) < many {
				t.Label = strconv.FormatFloat(v, 'g', 6, 64)
			}
			ticks = append(ticks, t)
		}
	}
	return ticks
}

// logRange rounds a range outward to 1, 2 or 5 of a decade, with room above for names.
func logRange(values []float64) (low, high float64) {
	low, high = math.Inf(1), 0
	for _, v := range values {
		if v > 0 && !math.IsInf(v, 0) {
			low, high = min(low, v), max(high, v)
		}
	}
	if high == 0 {
		return 0.1, 10
	}
	return roundLog(low/1.05, -1), roundLog(high*1.3, 1)
}

// roundLog goes to the next 1, 2 or 5 of a decade, up or down.
func roundLog(v float64, way int) float64 {
	steps := []float64{1, 2, 5, 10}
	decade := math.Pow(10, math.Floor(math.Log10(v)))
	for i := range steps {
		if way > 0 && steps[i]*decade >= v {
			return steps[i] * decade
		}
		if way < 0 && steps[len(steps)-1-i]*decade <= v {
			return steps[len(steps)-1-i] * decade
		}
	}
	return v
}
