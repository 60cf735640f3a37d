package main

// avx2 prints for amd64 with AVX2: eight lanes in one pass.
//
//	BX bank, SI Bench, R8 out or mix, R9 force, R10 window, R11 section, R12 node,
//	R13 sections left, R14 sums, R15 the other sums, CX frames left, DX bytes gone
//	in the lines, AX and DI scratch
type avx2 struct{ *printer }

func (avx2) goarch() string { return "amd64" }
func (avx2) width() int     { return 32 }

var avx2Pointers = registers{
	bank: "BX", bankD: "BX", outs: "R8", bank2: "R9", outs2: "R10", mix: "SI", benchF: "SI", sums: "R14", force: "R9", win: "R10", sect: "R11", node: "R12",
}

func (a avx2) begin(name string) {
	a.function(name, "b *Bank, w *Bench, force *floats, from, frames int", 40)
	a.put("MOVQ b+0(FP), BX")
	a.put("MOVQ w+8(FP), SI")
	a.put("MOVQ force+16(FP), R9")
	a.put("MOVQ from+24(FP), R8")
	a.put("MOVQ frames+32(FP), CX")
	a.put("SHLQ $5, R8")
	a.put("LEAQ Bank_Out(BX)(R8*1), R8")
	a.put("LEAQ Bench_window(SI), R10")
	a.put("LEAQ Bench_read(SI), R14")
	a.put("LEAQ (Bench_read+%d)(SI), R15", 4*floats)
}

func (a avx2) beginMix(name string, banks int) {
	if banks == 1 {
		a.function(name, "b *Bank, w *Mix, from, frames int", 32)
	} else {
		a.function(name, "b *Bank, w *Mix, from, frames int, c *Bank", 40)
		a.put("MOVQ c+32(FP), R9")
	}
	a.put("MOVQ b+0(FP), BX")
	a.put("MOVQ w+8(FP), SI")
	a.put("MOVQ from+16(FP), AX")
	a.put("MOVQ frames+24(FP), CX")
	a.put("SHLQ $5, AX")
	a.put("ADDQ AX, SI")
	a.put("LEAQ Bank_Out(BX)(AX*1), R8")
	if banks > 1 {
		a.put("LEAQ Bank_Out(R9)(AX*1), R10")
	}
}

func (a avx2) beginTurn(name string) {
	a.function(name, "b *Bank, w *Bench", 16)
	a.put("MOVQ b+0(FP), BX")
	a.put("MOVQ w+8(FP), SI")
}

func (a avx2) end() {
	a.put("VZEROUPPER")
	a.put("RET")
}

func (a avx2) jump(name string) { a.put("JMP %s", name) }

func (a avx2) jumpIfLess(name string, frames int) {
	a.put("CMPQ CX, $%d", frames)
	a.put("JLT %s", name)
}

func (a avx2) jumpIfEqual(name string, frames int) {
	a.put("CMPQ CX, $%d", frames)
	a.put("JEQ %s", name)
}

func (a avx2) rewind(quads int)  { a.put("MOVQ $%d, DX", -16*quads) }
func (a avx2) advance(group int) { a.put("ADDQ $%d, DX", 4*group) }

func (a avx2) count(frames int) { a.put("SUBQ $%d, CX", frames) }

func (a avx2) point(to pointer, m mem) { a.put("LEAQ %s, %s", avx2Pointers.at(m), avx2Pointers[to]) }
func (a avx2) move(p pointer, n int)   { a.put("ADDQ $%d, %s", n, avx2Pointers[p]) }
func (a avx2) countSections()          { a.put("MOVQ Bank_Sections(BX), R13") }

func (a avx2) repeatSections(name string) {
	a.put("DECQ R13")
	a.put("JNZ %s", name)
}

func (a avx2) load(d reg, m mem)  { a.put("VMOVUPS %s, Y%d", avx2Pointers.at(m), d) }
func (a avx2) store(m mem, s reg) { a.put("VMOVUPS Y%d, %s", s, avx2Pointers.at(m)) }
func (a avx2) copy(d, s reg)      { a.put("VMOVAPS Y%d, Y%d", s, d) }

// three prints an instruction as d = x op y: the assembler names y first.
func (a avx2) three(op string, d, x, y reg) { a.put("%s Y%d, Y%d, Y%d", op, y, x, d) }

func (a avx2) threeM(op string, d, x reg, m mem) {
	a.put("%s %s, Y%d, Y%d", op, avx2Pointers.at(m), x, d)
}

func (a avx2) mulF(d, x, y reg)      { a.three("VMULPS", d, x, y) }
func (a avx2) addF(d, x, y reg)      { a.three("VADDPS", d, x, y) }
func (a avx2) addFm(d, x reg, m mem) { a.threeM("VADDPS", d, x, m) }
func (a avx2) mulFm(d, x reg, m mem) { a.threeM("VMULPS", d, x, m) }
func (a avx2) mulD(d, x, y reg)      { a.three("VMULPD", d, x, y) }
func (a avx2) addD(d, x, y reg)      { a.three("VADDPD", d, x, y) }
func (a avx2) subD(d, x, y reg)      { a.three("VSUBPD", d, x, y) }
func (a avx2) addDm(d, x reg, m mem) { a.threeM("VADDPD", d, x, m) }
func (a avx2) mulDm(d, x reg, m mem) { a.threeM("VMULPD", d, x, m) }
func (a avx2) subDm(d, x reg, m mem) { a.threeM("VSUBPD", d, x, m) }
func (a avx2) addBias(d, x reg)      { a.put("VADDPS bias<>(SB), Y%d, Y%d", x, d) }

func (a avx2) widen(d, s reg, h half) {
	if h == low {
		a.put("VCVTPS2PD X%d, Y%d", s, d)
		return
	}
	a.put("VEXTRACTF128 $1, Y%d, X%d", s, d)
	a.put("VCVTPS2PD X%d, Y%d", d, d)
}

func (a avx2) narrow(d, s, scratch reg, h half) {
	a.put("VCVTPD2PSY Y%d, X%d", s, scratch)
	if h == low {
		a.put("VBLENDPS $0x0f, Y%d, Y%d, Y%d", scratch, d, d)
	} else {
		a.put("VINSERTF128 $1, X%d, Y%d, Y%d", scratch, d, d)
	}
}

func (a avx2) widenM(d reg, m mem, h half) {
	a.put("VCVTPS2PD %s, Y%d", avx2Pointers.at(m.plus(16*int(h))), d)
}

func (a avx2) storeHalf(m mem, s, scratch reg, h half) {
	a.put("VCVTPD2PSY Y%d, X%d", s, scratch)
	a.put("VMOVUPS X%d, %s", scratch, avx2Pointers.at(m.plus(16*int(h))))
}

// join loads by halves, as they were stored: a load across two stores has to wait for both.
func (a avx2) join(d reg, m mem) {
	a.put("VMOVUPS %s, X%d", avx2Pointers.at(m), d)
	a.put("VINSERTF128 $1, %s, Y%d, Y%d", avx2Pointers.at(m.plus(16)), d, d)
}

// loadQuad loads four samples of each line, lanes 0 to 3 below lanes 4 to 7.
func (a avx2) loadQuad(d, scratch [4]reg, table string) {
	for i, d := range d {
		a.put("MOVQ (Bench_%s+%d)(SI), AX", table, 8*i)
		a.put("MOVQ (Bench_%s+%d)(SI), DI", table, 8*(i+4))
		a.put("VMOVUPS (AX)(DX*1), X%d", d)
		a.put("VINSERTF128 $1, (DI)(DX*1), Y%d, Y%d", d, d)
	}
	a.transpose(d, scratch)
}

func (a avx2) swap() { a.put("XCHGQ R14, R15") }

func (a avx2) storeQuad(s, scratch [4]reg, behind int) {
	a.transpose(s, scratch)
	for i, s := range s {
		a.put("MOVQ (Bench_target+%d)(SI), AX", 8*i)
		a.put("MOVQ (Bench_target+%d)(SI), DI", 8*(i+4))
		a.put("VMOVUPS X%d, %d(AX)(DX*1)", s, -16*behind)
		a.put("VEXTRACTF128 $1, Y%d, %d(DI)(DX*1)", s, -16*behind)
	}
}

// transpose turns the rows of both squares into columns.
func (a avx2) transpose(x, t [4]reg) {
	a.three("VUNPCKLPS", t[0], x[0], x[1])
	a.three("VUNPCKHPS", t[1], x[0], x[1])
	a.three("VUNPCKLPS", t[2], x[2], x[3])
	a.three("VUNPCKHPS", t[3], x[2], x[3])
	a.three("VUNPCKLPD", x[0], t[0], t[2])
	a.three("VUNPCKHPD", x[1], t[0], t[2])
	a.three("VUNPCKLPD", x[2], t[1], t[3])
	a.three("VUNPCKHPD", x[3], t[1], t[3])
}
