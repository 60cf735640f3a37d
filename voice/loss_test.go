package voice

import (
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"sync"
	"testing"

	"tautwire/voice/lanes"
)

// sharedRows are the rows of all strings that tuned makes.
var sharedRows = sync.OnceValue(func() *lanes.Rows { return newRows(newInterpolator()) })

// tuned puts a string of a mode on a voice of its own, with room to be bent by some octaves.
func tuned(m *mode, ip *interpolator, f0, octaves float64) *loop {
	maker := &Maker{rate: m.rate, ip: ip, rows: sharedRows()}
	maker.smooth, maker.smoothLong = newSmoothing(m.rate, 1), newSmoothing(m.rate, longSteps)
	v := newVoice(maker, linesFor(f0*math.Exp2(-octaves)/1.2, m.rate)+1024)
	v.Fit(&Design{maker: maker, pitch: f0, modes: [2]*mode{m}, strings: []strand{{mix: 1}}})
	return &v.loops[0]
}

// partialsOf calls f for every partial of a loop below top (Hz) that the law lets lose
// less than 2 dB a trip, with its T60 and the law's.
func partialsOf(l *loop, law law, f0, b, top float64, f func(hz, t60, want float64)) {
	rate := l.mode.rate
	for n := 1; ; n++ {
		hz := StiffPartial(n, f0, b)
		if hz > min(top, 0.45*rate) {
			return
		}
		gain, trip := l.response(2 * math.Pi * hz / rate)
		want := law.t60(hz, f0)
		if 60*trip/rate/want > 2 {
			return
		}
		f(hz, -decayNepers*trip/rate/math.Log(cmplx.Abs(gain)), want)
	}
}

func TestPartialsKeepTheLaw(t *testing.T) {
	bounds := []struct {
		b          float64
		low, upper float64 // relative error below 3 kHz, from there to 8 kHz
	}{{0, 0.03, 0.10}, {1e-4, 0.06, 10}, {3e-4, 0.15, 10}, {1e-3, 0.30, 10}}
	ip := newInterpolator()
	for _, rate := range rates {
		for _, bound := range bounds {
			worst := [2]float64{}
			for _, decay := range []float64{0.3, 1, 5, 30, 120} {
				for _, brightness := range []float64{0, 0.25, 0.5, 0.75, 1} {
					step := 3
					if bound.b > 0 {
						step = 8
					}
					for key := 21; key <= 108; key += step * stride {
						f0 := hz(key)
						law := newLaw(decay, brightness)
						l := tuned(newMode(law, law, f0, bound.b, rate), ip, f0, 0)
						partialsOf(l, law, f0, bound.b, 8000, func(hz, t60, want float64) {
							e := math.Abs(t60/want - 1)
							band, limit := 0, bound.low
							if hz > 3000 {
								band, limit = 1, bound.upper
							}
							if bound.b == 0 || band == 0 {
								worst[band] = max(worst[band], e)
							}
							if e > limit {
								t.Errorf("rate %g, B %g, decay %g, brightness %g, key %d: T60 %.4f s at %.0f Hz, the law says %.4f s", rate, bound.b, decay, brightness, key, t60, hz, want)
							}
						})
					}
				}
			}
			t.Logf("rate %g, B %g: T60 within %.2f %% below 3 kHz, %.2f %% above", rate, bound.b, 100*worst[0], 100*worst[1])
		}
	}
}

// TestBentPartialsKeepTheLaw: between the pitches that have been fitted, too.
func TestBentPartialsKeepTheLaw(t *testing.T) {
	const rate, low, upper = 48000, 0.03, 0.10 // relative error below 3 kHz, from there to 8 kHz
	ip := newInterpolator()
	r := rand.New(rand.NewPCG(3, 3))
	for _, decay := range []float64{0.3, 1, 5, 30} {
		for _, brightness := range []float64{0, 0.25, 0.5, 0.75, 1} {
			law := newLaw(decay, brightness)
			for key := 21; key <= 108; key += 5 {
				m := newMode(law, law, hz(key), 0, rate)
				for _, octaves := range []float64{0.05, 0.3, 1, 3.5} {
					f0 := min(4000, max(20, hz(key)*math.Exp2(octaves*(2*r.Float64()-1))))
					partialsOf(tuned(m, ip, f0, 0), law, f0, 0, 8000, func(hz, t60, want float64) {
						limit := low
						if hz > 3000 {
							limit = upper
						}
						// the fundamental keeps the decay of the key
						if e := math.Abs(t60/want - 1); e > limit && hz > 1.5*f0 {
							t.Errorf("decay %g, brightness %g, key %d bent to %.1f Hz: T60 %.4f s at %.0f Hz, the law says %.4f s", decay, brightness, key, f0, t60, hz, want)
						}
					})
				}
			}
		}
	}
}

func TestNeighboursAreEven(t *testing.T) {
	ip := newInterpolator()
	for _, rate := range rates {
		for _, decay := range []float64{0.5, 4, 30} {
			for _, brightness := range []float64{0.1, 0.5, 0.9} {
				law, last := newLaw(decay, brightness), 0.0
				for key := 40; key <= 76; key += stride {
					f0 := hz(key)
					near := math.Round(3000/f0) * f0
					l := tuned(newMode(law, law, f0, 0, rate), ip, f0, 0)
					gain, trip := l.response(2 * math.Pi * near / rate)
					if 60*trip/rate/law.t60(near, f0) > 2 {
						last = 0
						continue
					}
					ratio := -decayNepers * trip / rate / math.Log(cmplx.Abs(gain)) / law.t60(near, f0)
					if last > 0 && math.Abs(ratio/last-1) > 0.02 {
						t.Errorf("rate %g, decay %g, brightness %g: key %d at 3 kHz has %.4f of the law, its neighbour %.4f", rate, decay, brightness, key, ratio, last)
					}
					last = ratio
				}
			}
		}
	}
}

// TestLoopStaysBelowOne sweeps the gain of a whole trip over all frequencies, for every
// key, every rate and the corners of the patch's ranges, at rest, bent and
// muted. A loop above one anywhere would grow.
func TestLoopStaysBelowOne(t *testing.T) {
	ip := newInterpolator()
	r := rand.New(rand.NewPCG(1, 1))
	check := func(what string, l *loop) {
		t.Helper()
		if !(twoPole{l.bank.C1[l.lane], l.bank.C2[l.lane]}).stable() {
			t.Fatalf("%s: the loss filter's poles are outside: %g %g", what, l.bank.C1[l.lane], l.bank.C2[l.lane])
		}
		for i := 0; i <= 700; i++ {
			w := math.Pi * float64(i) / 700
			if i <= 100 { // closer together near zero, where a low-pass is at its highest
				w = 0.05 * float64(i) / 100
			}
			if gain, _ := l.response(w); cmplx.Abs(gain) >= 1 {
				t.Fatalf("%s: gain %.9f at w = %.4f", what, cmplx.Abs(gain), w)
			}
		}
	}
	for _, rate := range append([]float64{8000, 192000}, rates...) {
		for key := 0; key < 128; key += stride {
			f0 := hz(key)
			for _, decay := range []float64{0.05, 120} {
				for _, brightness := range []float64{0, 1} {
					for _, b := range []float64{0, 2e-3} {
						if b > 0 && key%8 > 0 {
							continue
						}
						law := newLaw(decay, brightness)
						m := newMode(law, newLaw(min(decay, muted), max(0, brightness-duller)), f0, b, rate)
						what := fmt.Sprintf("rate %g, key %d, decay %g, brightness %g, B %g", rate, key, decay, brightness, b)
						l := tuned(m, ip, f0, 0)
						check(what, l)
						g := &l.glide
						for range 2 {
							g.pitch = l.hold(f0 * math.Exp2(8*r.Float64()-4))
							g.touch = touch{r.Float64(), r.Float64()}
							l.settle()
							l.stand()
							check(fmt.Sprintf("%s, at %.2f Hz, touch %.2f", what, g.pitch, g.touch), l)
						}
					}
				}
			}
		}
	}
}

// TestFitsAreStable looks at each filter of the tables, also where a trip takes all.
func TestFitsAreStable(t *testing.T) {
	for _, rate := range append([]float64{8000, 192000}, rates...) {
		for key := 0; key < 128; key += stride {
			for _, decay := range []float64{0.005, 0.05, 120} {
				for _, brightness := range []float64{0, 1} {
					for _, b := range []float64{0, 2e-3} {
						m := newMode(newLaw(decay, brightness), newLaw(min(decay, muted), max(0, brightness-duller)), hz(key), b, rate)
						for _, table := range []lossTable{m.open, m.dull} {
							for i, l := range table.at {
								if !l.stable() {
									t.Errorf("rate %g, key %d, decay %g, brightness %g, B %g: filter %d of %d is %v", rate, key, decay, brightness, b, i, len(table.at), l)
								}
							}
						}
					}
				}
			}
		}
	}
}

// TestLoopStaysBelowOneOnTheWay sweeps the gain while a string glides between two
// pitches, when taps and filters are those of neither. The read of a gliding string is a
// hair above or below one as its delay is before or behind that of its taps, so there the mean
// over a control step counts: it is what makes a partial grow.
func TestLoopStaysBelowOneOnTheWay(t *testing.T) {
	const points, places = 100, 8
	const overshoot = 1 + 3e-4 // at any one frame of a glide
	worst := 0.0
	r := rand.New(rand.NewPCG(2, 2))
	ip := newInterpolator()
	for range 150 / stride {
		rate := rates[r.IntN(len(rates))]
		f0 := hz(r.IntN(128))
		law := newLaw(0.05*math.Pow(2400, r.Float64()), r.Float64())
		m := newMode(law, newLaw(muted, 0), f0, float64(r.IntN(2))*1e-3*r.Float64(), rate)
		l := tuned(m, ip, f0, 4)
		l.glide.aim = l.hold(f0 * math.Exp2(8*r.Float64()-4))
		l.wake()
		l.glide.palmAim = r.Float64()
		for step := range 60 {
			l.pool.Step()
			var nepers [points]float64
			for place := range places {
				l.pool.Advance(Grid/places*place + 2)
				for i := range nepers {
					w := math.Pi * float64(i*i) / (points * points)
					gain, _ := l.response(w)
					nepers[i] += math.Log(cmplx.Abs(gain))
					bound := 1.0
					if l.motion == gliding {
						bound = overshoot
						worst = max(worst, cmplx.Abs(gain)-1)
					}
					if cmplx.Abs(gain) >= bound {
						t.Fatalf("rate %g, from %.2f to %.2f Hz, step %d: gain %.9f at w = %.4f", rate, f0, l.glide.aim, step, cmplx.Abs(gain), w)
					}
				}
			}
			l.pool.Advance(Grid)
			for i, sum := range nepers {
				if sum >= 0 {
					t.Fatalf("rate %g, from %.2f to %.2f Hz, step %d: gain 1 %+.2e at w = %.4f", rate, f0, l.glide.aim, step, sum/places, math.Pi*float64(i*i)/(points*points))
				}
			}
		}
	}
	t.Logf("at most 1 %+.1e for a frame of a glide", worst)
}
