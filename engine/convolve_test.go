package engine

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"gonum.org/v1/gonum/floats"
)

// noiseResponse is an impulse response of n frames that falls by 60 dB.
func noiseResponse(n int, seed uint64) []float64 {
	random := rand.New(rand.NewPCG(seed, 1))
	h := make([]float64, n)
	for i := range h {
		h[i] = random.NormFloat64() * math.Pow(10, -3*float64(i)/float64(n))
	}
	return h
}

func noiseFrames(n int, seed uint64) (left, right []float32) {
	random := rand.New(rand.NewPCG(seed, 2))
	left, right = make([]float32, n), make([]float32, n)
	for i := range left {
		left[i] = float32(random.Float64()*2 - 1)
		right[i] = float32(random.Float64()*2 - 1)
	}
	return left, right
}

// convolveDirectly is the definition of convolution, cut at x's end.
func convolveDirectly(x []float32, h []float64) []float64 {
	padded := make([]float64, len(h)-1+len(x))
	for i, v := range x {
		padded[len(h)-1+i] = float64(v)
	}
	backward := slices.Clone(h)
	slices.Reverse(backward)
	y := make([]float64, len(x))
	for i := range y {
		y[i] = floats.Dot(padded[i:i+len(h)], backward)
	}
	return y
}

// errorLevel is the greatest difference over the root mean square of want, dB.
func errorLevel(got []float32, want []float64) float64 {
	worst := 0.0
	for i, w := range want {
		worst = max(worst, math.Abs(float64(got[i])-w))
	}
	return 20 * math.Log10(worst/(floats.Norm(want, 2)/math.Sqrt(float64(len(want)))))
}

func TestConvolutionIsTheDirectOne(t *testing.T) {
	lengths := []int{1, 2, 63, 64, 65, 127, 128, 129, 1023, 1024, 1025, 1536, 1537, 8191, 8192, 8193, 12289, 40000}
	if testing.Short() {
		lengths = []int{1, 64, 65, 1537, 8193}
	}
	for _, n := range lengths {
		h := noiseResponse(n, uint64(n))
		left, right := noiseFrames(n+2*deepest+777, 3)
		wantLeft, wantRight := convolveDirectly(left, h), convolveDirectly(right, h)
		newConvolver(newImpulse(h)).process(left, right)
		for name, level := range map[string]float64{"left": errorLevel(left, wantLeft), "right": errorLevel(right, wantRight)} {
			if !(level < -110) {
				t.Errorf("response of %d frames: %s is off by %.1f dB; want below -110 dB", n, name, level)
			}
			t.Logf("response of %d frames: %s is off by %.1f dB", n, name, level)
		}
	}
}

// Every single frame of a response comes out where it belongs: a wrong place
// would hide in noise only if it were small.
func TestConvolutionHasNoLatency(t *testing.T) {
	h := noiseResponse(20000, 5)
	left, right := make([]float32, 3*len(h)), make([]float32, 3*len(h))
	const at = 37
	left[at], right[at] = 1, -0.5
	newConvolver(newImpulse(h)).process(left, right)
	for i := range left {
		want := 0.0
		if k := i - at; k >= 0 && k < len(h) {
			want = h[k]
		}
		if math.Abs(float64(left[i])-want) > 1e-6 || math.Abs(float64(right[i])+0.5*want) > 1e-6 {
			t.Fatalf("frame %d: %v, %v; want %v, %v", i, left[i], right[i], want, -0.5*want)
		}
	}
}

// cuts are the ways in which a stream is cut into calls: one length again and
// again, or (0) lengths as they come.
var cuts = []int{1, 7, 64, 128, 1024, 0}

func processInCalls(process func(left, right []float32), left, right []float32, call int) {
	random := rand.New(rand.NewPCG(9, 9))
	for start := 0; start < len(left); {
		n := call
		if call == 0 {
			n = []int{1, 7, 64, 128, 1024}[random.IntN(5)]
		}
		end := min(start+n, len(left))
		process(left[start:end], right[start:end])
		start = end
	}
}

func TestConvolutionIsTheSameHoweverCut(t *testing.T) {
	c := newImpulse(noiseResponse(20000, 7))
	wantLeft, wantRight := noiseFrames(40000, 8)
	newConvolver(c).process(wantLeft, wantRight)
	for _, call := range cuts {
		left, right := noiseFrames(40000, 8)
		processInCalls(newConvolver(c).process, left, right, call)
		if !slices.Equal(left, wantLeft) || !slices.Equal(right, wantRight) {
			t.Errorf("calls of %d frames: not the bits of one call", call)
		}
	}
}

func TestConvolverResets(t *testing.T) {
	c := newImpulse(noiseResponse(20000, 7))
	wantLeft, wantRight := noiseFrames(30000, 8)
	newConvolver(c).process(wantLeft, wantRight)
	v := newConvolver(c)
	left, right := noiseFrames(12345, 11)
	v.process(left, right)
	v.reset()
	left, right = noiseFrames(30000, 8)
	v.process(left, right)
	if !slices.Equal(left, wantLeft) || !slices.Equal(right, wantRight) {
		t.Error("after a reset: not the bits of a new convolver")
	}
}

func TestConvolutionAllocatesNothing(t *testing.T) {
	v := newConvolver(newImpulse(noiseResponse(20000, 7)))
	left, right := noiseFrames(deepest, 8)
	if n := testing.AllocsPerRun(4, func() { v.process(left, right) }); n != 0 {
		t.Errorf("%v allocations for %d frames; want none", n, deepest)
	}
}

// The slices of a block of the longest response are even in work: none has more
// than its share and one task.
func TestWorkIsSpread(t *testing.T) {
	for _, l := range newImpulse(noiseResponse(2*96000, 7)).levels {
		if last, tasks := l.until[len(l.until)-1], newFourStep(2*l.size).tasks(); last != tasks {
			t.Errorf("partitions of %d: %d tasks are done in time; want all %d", l.size, last, tasks)
		}
		for i := 1; i < len(l.until); i++ {
			if l.until[i] == l.until[i-1] {
				t.Errorf("partitions of %d: slice %d does nothing", l.size, i)
			}
		}
	}
}

// BenchmarkConvolution gives ns per stereo frame in calls of 64 frames, beside
// the direct filter as the control; and of the call that takes the longest by
// its place on the grid, µs (each place's quickest of several rounds, so that
// other work on the machine does not count).
func BenchmarkConvolution(b *testing.B) {
	const period = 64
	for _, n := range []int{tick, 4800, 24000, 2 * 96000} {
		h := noiseResponse(n, 7)
		source, other := noiseFrames(period, 8)
		left, right := make([]float32, period), make([]float32, period)
		b.Run(fmt.Sprintf("partitioned/%d", n), func(b *testing.B) {
			v := newConvolver(newImpulse(h))
			quickest := make([]time.Duration, deepest/period)
			round := 0
			for ; b.Loop(); round++ {
				copy(left, source)
				copy(right, other)
				start := time.Now()
				v.process(left, right)
				took := time.Since(start)
				if q := &quickest[round%len(quickest)]; *q == 0 || took < *q {
					*q = took
				}
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*period), "ns/frame")
			b.ReportMetric(float64(slices.Max(quickest).Nanoseconds())/1e3, "µs/worst-call")
		})
		b.Run(fmt.Sprintf("direct/%d", n), func(b *testing.B) {
			history := make([]float64, n+period)
			for i := range history {
				history[i] = float64(i%17) - 8
			}
			for b.Loop() {
				for range 2 {
					for i := range left {
						left[i] = float32(floats.Dot(history[i:i+n], h))
					}
				}
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*period), "ns/frame")
		})
	}
}
