package main

import (
	"strings"
	"testing"
)

// TestWords compares operations with what the GNU assembler makes of their
// comments.
func TestWords(t *testing.T) {
	for _, c := range []struct {
		o         operation
		registers []reg
		want      string
	}{
		{faddF, []reg{17, 2, 31}, "WORD $0x4e3fd451 // fadd v17.4s, v2.4s, v31.4s"},
		{fmulF, []reg{17, 2, 31}, "WORD $0x6e3fdc51 // fmul v17.4s, v2.4s, v31.4s"},
		{faddD, []reg{17, 2, 31}, "WORD $0x4e7fd451 // fadd v17.2d, v2.2d, v31.2d"},
		{fsubD, []reg{17, 2, 31}, "WORD $0x4effd451 // fsub v17.2d, v2.2d, v31.2d"},
		{fmulD, []reg{17, 2, 31}, "WORD $0x6e7fdc51 // fmul v17.2d, v2.2d, v31.2d"},
		{fcvtl, []reg{17, 2}, "WORD $0x0e617851 // fcvtl v17.2d, v2.2s"},
		{fcvtl2, []reg{17, 2}, "WORD $0x4e617851 // fcvtl2 v17.2d, v2.4s"},
		{fcvtn, []reg{17, 2}, "WORD $0x0e616851 // fcvtn v17.2s, v2.2d"},
		{fcvtn2, []reg{17, 2}, "WORD $0x4e616851 // fcvtn2 v17.4s, v2.2d"},
	} {
		n := neon{&printer{}}
		n.word(c.o, c.registers...)
		if got := strings.TrimSpace(n.text().String()); got != c.want {
			t.Errorf("%s, want %s", got, c.want)
		}
	}
}
