package voice

import "testing"

// BenchmarkSubnormalStrings is BenchmarkPlainString of strings that ring on in the range of
// subnormal numbers. They would stay there for minutes: what keeps the loop out of it has to
// work at every frame.
func BenchmarkSubnormalStrings(b *testing.B) {
	const faint = 1e-39 // of full scale; below 1.2e-38 a float32 is subnormal
	p := bed(NewMaker(48000), lasting(), benchStrings)
	for i := range p.bench.Line {
		p.bench.Line[i] *= faint
	}
	for i := range p.banks {
		bank := &p.banks[i]
		for lane := range bank.V1 {
			bank.V1[lane] *= faint
			bank.V2[lane] *= faint
		}
	}
	p.measure(b, 1, nil)
}
