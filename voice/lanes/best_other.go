//go:build !amd64 && !arm64

package lanes

// Best is the fastest kernel for this processor.
func Best() Kernel { return Portable() }
