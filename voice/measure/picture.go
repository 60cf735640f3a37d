package measure

import "math"

// Curve is a level over time, to plot.
type Curve struct {
	Time []float64 // s: the middle of what was looked at
	DB   []float64 // -Inf for silence
}

// Len and XY make a Curve a plotter.XYer of gonum's plot. Silence is drawn at
// -200 dB, for a plot knows no infinity.
func (c Curve) Len() int { return len(c.Time) }

// XY is point i: s and dB.
func (c Curve) XY(i int) (x, y float64) { return c.Time[i], drawn(c.DB[i]) }

// Decay is the RMS level of a signal in steps of the given length in s, at least
// one frame; a last step that is not whole is left out.
func Decay[S Sample](signal []S, rate, step float64) Curve {
	n := max(1, int(math.Round(step*rate)))
	var c Curve
	for i := 0; i+n <= len(signal); i += n {
		c.Time = append(c.Time, (float64(i)+float64(n)/2)/rate)
		c.DB = append(c.DB, RMS(signal[i:i+n]))
	}
	return c
}

// Grid is a level over time (columns) and frequency (rows), a plotter.GridXYZ of
// gonum's plot. Silence is drawn at -200 dB.
type Grid struct {
	Time  []float64   // s: the middle of each column's window
	Hz    []float64   // of each row
	Level [][]float64 // dB by column and row; a steady sine of full scale has 0
}

// Spectrogram looks at a signal through Kaiser windows of the given length, one every
// step, both in s, up to the frequency top in Hz. A signal shorter than one window
// gives an empty grid.
func Spectrogram[S Sample](signal []S, rate, window, step, top float64) Grid {
	n, hop := max(1, int(math.Round(window*rate))), max(1, int(math.Round(step*rate)))
	var g Grid
	for i := 0; i+n <= len(signal); i += hop {
		s := NewSpectrum(signal[i:i+n], rate)
		rows := min(len(s.DB), int(top/s.Step)+1)
		g.Time = append(g.Time, (float64(i)+float64(n)/2)/rate)
		g.Level = append(g.Level, s.DB[:rows])
		if g.Hz == nil {
			for r := range rows {
				g.Hz = append(g.Hz, float64(r)*s.Step)
			}
		}
	}
	return g
}

// Dims is how many columns and rows there are.
func (g Grid) Dims() (columns, rows int) { return len(g.Time), len(g.Hz) }

// X is a column's time in s.
func (g Grid) X(column int) float64 { return g.Time[column] }

// Y is a row's frequency in Hz.
func (g Grid) Y(row int) float64 { return g.Hz[row] }

// Z is the level in dB.
func (g Grid) Z(column, row int) float64 { return drawn(g.Level[column][row]) }

func drawn(level float64) float64 { return math.Max(level, -200) }
