package lanes

// Best is the fastest kernel for this processor: arm64 always has NEON.
func Best() Kernel { return vector("NEON") }
