//go:build amd64 || arm64

package lanes

import (
	"runtime"
	"unsafe"
)

//go:generate go run ./asm

// The kernels that the program in the folder asm writes. They find the lines by the
// addresses in Bench.

//go:noescape
func stillPlain(b *Bank, w *Bench, force *floats, from, frames int)

//go:noescape
func movingPlain(b *Bank, w *Bench, force *floats, from, frames int)

//go:noescape
func stillStiff1(b *Bank, w *Bench, force *floats, from, frames int)

//go:noescape
func stillStiff2(b *Bank, w *Bench, force *floats, from, frames int)

//go:noescape
func stillStiff3(b *Bank, w *Bench, force *floats, from, frames int)

//go:noescape
func stillStiff4(b *Bank, w *Bench, force *floats, from, frames int)

//go:noescape
func movingStiff(b *Bank, w *Bench, force *floats, from, frames int)

//go:noescape
func glidingPlain(b *Bank, w *Bench, force *floats, from, frames int)

//go:noescape
func glidingStiff(b *Bank, w *Bench, force *floats, from, frames int)

//go:noescape
func turnRows(b *Bank, w *Bench)

//go:noescape
func mixOne(b *Bank, w *Mix, from, frames int)

//go:noescape
func mixTwo(b *Bank, w *Mix, from, frames int, c *Bank)

// vector is the kernel of a vector unit.
func vector(name string) Kernel {
	moving, gliding := onLines(movingStiff), onLines(glidingStiff)
	k := Kernel{
		name:  name,
		plain: kinds{onLines(stillPlain), onLines(movingPlain), onLines(glidingPlain)},
		turn:  turn,
		mix:   mixBanks,
	}
	for i, still := range []kernel{stillStiff1, stillStiff2, stillStiff3, stillStiff4} {
		k.stiff[i+1] = kinds{onLines(still), moving, gliding}
	}
	return k
}

type kernel func(b *Bank, w *Bench, force *floats, from, frames int)

// onLines tells a kernel where the lines are.
func onLines(do kernel) run {
	return func(b *Bank, w *Bench, force *Force, ahead, from, frames int) {
		base := uintptr(unsafe.Pointer(unsafe.SliceData(w.Line)))
		last := int64(len(w.Line)) - int64(frames) - Spill
		for i, at := range b.At {
			at += int64(ahead)
			first := b.oldest(i, int64(ahead))
			if b.Back[i] < Taps-1+Shortest || first < History || first > last-Taps || at < 0 || at > last {
				panic("lanes: a lane reaches outside its line")
			}
			w.source[i] = base + 4*uintptr(first+Taps-1)
			w.target[i] = base + 4*uintptr(at)
		}
		do(b, w, &force[from], from, frames)
		runtime.KeepAlive(w.Line)
	}
}

// turn begins a block of a glide.
func turn(b *Bank, w *Bench) {
	for lane := range b.Glide {
		row := &b.own[lane]
		if b.Glide[lane].On {
			row = b.turn(lane, w.Rows)
		}
		w.row[lane] = uintptr(unsafe.Pointer(row))
	}
	turnRows(b, w)
	runtime.KeepAlive(w.Rows)
}

// mixBanks mixes two banks, of which the second may be nil.
func mixBanks(m *Mix, from, frames int, b, c *Bank) {
	if c == nil {
		mixOne(b, m, from, frames)
	} else {
		mixTwo(b, m, from, frames, c)
	}
}
