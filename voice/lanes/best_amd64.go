package lanes

import "golang.org/x/sys/cpu"

// Best is the fastest kernel for this processor, which it asks.
func Best() Kernel {
	if !cpu.X86.HasAVX2 {
		return Portable()
	}
	return vector("AVX2")
}
