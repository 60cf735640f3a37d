package lanes

import (
	"encoding/binary"
	"hash/fnv"
	"math"
	"math/rand/v2"
	"testing"
)

// scene is a bank with everything in motion, on lines of noise, the same on all
// machines.
func scene(seed uint64, sections int) (*Bank, []float32, *Force) {
	r := rand.New(rand.NewPCG(seed, 1))
	small := func(scale float64) float64 { return float64(scale * (2*r.Float64() - 1)) }
	const slot = 600
	line := make([]float32, slot*Width)
	for i := range line {
		line[i] = float32(small(0.5))
	}
	b := &Bank{Sections: int64(sections)}
	for l := range Width {
		b.Back[l] = int64(Taps - 1 + Shortest + r.IntN(300))
		if r.IntN(3) == 0 {
			b.Back[l] = int64(Taps - 1 + Shortest + r.IntN(6))
		}
		b.At[l] = int64(slot*l + 400 + r.IntN(32))
		var h [Taps]float32
		for t := range h {
			h[t] = float32(small(0.2))
		}
		b.SetTaps(l, &h)
		b.Level[l], b.DLevel[l] = float32(1+small(0.1)), float32(small(1e-3))
		b.C1[l], b.C2[l] = small(0.4), small(0.3)
		b.DC1[l], b.DC2[l] = small(1e-3), small(1e-3)
		b.V1[l], b.V2[l] = small(1), small(1)
		b.Gain[l], b.Zero[l], b.Pole[l] = 1+small(0.1), small(0.5), small(0.5)
		b.DGain[l], b.DZero[l], b.DPole[l] = small(1e-3), small(1e-3), small(1e-3)
		b.Left[l], b.Right[l] = float32(small(1)), float32(small(1))
		b.DLeft[l], b.DRight[l] = float32(small(0.01)), float32(small(0.01))
		for i := range sections {
			s := &b.Section[i]
			s.A1[l], s.A2[l] = small(0.5), small(0.4)
			s.DA1[l], s.DA2[l] = small(1e-3), small(1e-3)
		}
		for i := range sections + 1 {
			b.Node[i].X[l], b.Node[i].X1[l] = small(1), small(1)
		}
	}
	b.Block = int64(1) << r.IntN(4)
	for l := range b.Glide {
		if r.IntN(3) > 0 {
			b.glide(l, r)
		}
	}
	force := &Force{}
	for f := range force {
		for l := range Width {
			force[f][l] = float32(small(0.1))
		}
	}
	return b, line, force
}

// play renders a scene for some control steps, cut into pieces, all into the same
// mix: what is added to nothing tells nothing of how it was rounded.
func play(k Kernel, seed uint64, sections int, motion Motion, cut func() int) (*Bank, *Mix, []float32) {
	b, line, force := scene(seed, sections)
	m, w := &Mix{}, &Bench{Line: line, Rows: rows()}
	for range 4 {
		for from := 0; from < Frames; {
			until := min(Frames, from+cut())
			k.Render(b, w, force, motion, from, until)
			for l := range b.At {
				b.At[l] += int64(until - from)
			}
			k.Mix(m, from, until, b, nil)
			from = until
		}
	}
	return b, m, line
}

// TestKernelsAgree compares the bits of this processor's kernel with those of the
// portable one, for all kinds of strings, however the frames are cut.
func TestKernelsAgree(t *testing.T) {
	best := Best()
	t.Logf("this processor: %v", best)
	r := rand.New(rand.NewPCG(7, 7))
	for seed := range uint64(40) {
		for sections := range MaxSections + 1 {
			for motion := range Gliding + 1 {
				want, wantMix, wantLine := play(Portable(), seed, sections, motion, func() int { return Frames })
				for _, c := range []struct {
					name string
					k    Kernel
					cut  func() int
				}{
					{"whole", best, func() int { return Frames }},
					{"cut", best, func() int { return 1 + r.IntN(9) }},
					{"portable, cut", Portable(), func() int { return 1 + r.IntN(9) }},
				} {
					got, gotMix, gotLine := play(c.k, seed, sections, motion, c.cut)
					if *got != *want {
						t.Fatalf("%s: seed %d, %d sections, motion %d: banks differ", c.name, seed, sections, motion)
					}
					if *gotMix != *wantMix {
						t.Fatalf("%s: seed %d, %d sections, motion %d: mixes differ", c.name, seed, sections, motion)
					}
					for l := range want.At {
						for i := want.At[l] - 4*Frames; i < want.At[l]; i++ {
							if math.Float32bits(gotLine[i]) != math.Float32bits(wantLine[i]) {
								t.Fatalf("%s: seed %d, %d sections, motion %d: lane %d differs at %d: %g, %g",
									c.name, seed, sections, motion, l, i, gotLine[i], wantLine[i])
							}
						}
					}
				}
			}
		}
	}
}

// glide sets a lane going, slowly enough to stay in its line.
func (b *Bank) glide(l int, r *rand.Rand) {
	slow := func(scale float64) int64 { return int64(scale * (2*r.Float64() - 1) * (1 << 32)) }
	b.Glide[l] = Glide{On: true, Delay: (b.Back[l]+20)<<32 + slow(1), D1: slow(0.1), D2: slow(1e-3), D3: slow(1e-5)}
	b.DOffset[l], b.D2Offset[l], b.D3Offset[l] = float32(r.Float64()*0.02), 1e-4, 1e-6
}

// rows are of no use but to be told apart.
func rows() *Rows {
	r := rand.New(rand.NewPCG(3, 3))
	t := &Rows{}
	for i := range t {
		for j := range t[i].Tap {
			t[i].Tap[j] = 0.2 * (2*r.Float32() - 1)
		}
		for j := range t[i].Slope {
			t[i].Slope[j] = 0.2 * (2*r.Float32() - 1)
		}
		for j := range CurveTaps {
			t[i].Curve[j] = 0.2 * (2*r.Float32() - 1)
		}
	}
	return t
}

// TestBitsAreTheSameEverywhere compares the portable kernel, with which the others
// agree, with what it gave on another kind of processor: a compiler that fuses a
// product with a sum changes bits.
func TestBitsAreTheSameEverywhere(t *testing.T) {
	const want = 0x533b26b8654098e3
	h := fnv.New64a()
	for seed := range uint64(4) {
		for sections := range MaxSections + 1 {
			for motion := range Gliding + 1 {
				b, m, line := play(Portable(), seed, sections, motion, func() int { return Frames })
				for _, part := range []any{line, &m.Left, &m.Right, &b.Power, &b.V1, &b.V2, &b.Node} {
					if err := binary.Write(h, binary.LittleEndian, part); err != nil {
						t.Fatal(err)
					}
				}
			}
		}
	}
	if got := h.Sum64(); got != want {
		t.Errorf("%#x, want %#x", got, uint64(want))
	}
}

// TestTwoBanksMixAsOneAfterTheOther compares bits.
func TestTwoBanksMixAsOneAfterTheOther(t *testing.T) {
	for _, k := range []Kernel{Best(), Portable()} {
		for seed := range uint64(5) {
			b, _, _ := scene(seed, 0)
			c, _, _ := scene(seed+100, 0)
			for f := range b.Out {
				for l := range b.Out[f] {
					b.Out[f][l], c.Out[f][l] = b.Tap[f%Taps][l], c.Tap[(f+l)%Taps][l]
				}
			}
			b2, c2 := *b, *c
			one, two := &Mix{}, &Mix{}
			k.Mix(one, 3, 30, b, nil)
			k.Mix(one, 3, 30, c, nil)
			k.Mix(two, 3, 30, &b2, &c2)
			if *one != *two || *b != b2 || *c != c2 {
				t.Errorf("%v, seed %d: they differ", k, seed)
			}
		}
	}
}
