//go:build amd64 || arm64

package lanes

import (
	"runtime"
	"unsafe"
)

//go:generate go run ./asm

// The kernels that the program in the folder asm writes. They take force and
// Mix.window by address, and the lines by those in Mix.

//go:noescape
func stillPlain(b *Bank, m *Mix, force *floats, from, frames int)

//go:noescape
func movingPlain(b *Bank, m *Mix, force *floats, from, frames int)

//go:noescape
func stillStiff(b *Bank, m *Mix, force *floats, from, frames int)

//go:noescape
func movingStiff(b *Bank, m *Mix, force *floats, from, frames int)

// vector is the kernel of a vector unit.
func vector(name string) Kernel {
	return Kernel{
		name:  name,
		plain: pair{onLines(stillPlain), onLines(movingPlain)},
		stiff: pair{onLines(stillStiff), onLines(movingStiff)},
	}
}

// onLines tells a kernel where the lines are.
func onLines(kernel func(b *Bank, m *Mix, force *floats, from, frames int)) run {
	return func(b *Bank, m *Mix, line []float32, force *Force, from, frames int) {
		base := uintptr(unsafe.Pointer(unsafe.SliceData(line)))
		for i, at := range b.At {
			m.source[i] = base + 4*uintptr(at-b.Back[i]+Taps-1)
			m.target[i] = base + 4*uintptr(at)
		}
		kernel(b, m, &force[from], from, frames)
		runtime.KeepAlive(line)
	}
}
