package main

import "fmt"

// neon prints for arm64: a register holds four lanes, so a kernel makes two
// passes, over lanes 0 to 3 and over lanes 4 to 7.
//
//	R0 bank, R1 Bank for doubles, R2 out, R3 force, R4 window, R5 section,
//	R6 node, R7 Bench for the lines, R13 Bench for floats or mix, R8 bytes gone in the lines, R9 frames left,
//	R14 sums, R15 the other sums, R10 sections left, R11 scratch, R12 bytes from lane 0 to the pass's first,
//	V16 scratch, V31 the bias
type neon struct{ *printer }

const (
	operand reg = 16 // what an instruction takes from memory
	biases  reg = 31
)

func (neon) goarch() string { return "arm64" }
func (neon) width() int     { return 16 }

var neonPointers = registers{
	bank: "R0", bankD: "R1", outs: "R2", bank2: "R3", outs2: "R4", mix: "R13", benchF: "R13", sums: "R14", force: "R3", win: "R4", sect: "R5", node: "R6",
}

// begin takes the arguments anew in each pass. A float takes four bytes, a
// double and a line's address eight.
func (n neon) begin(name string) {
	n.function(name, "b *Bank, w *Bench, force *floats, from, frames int", 40)
	n.put("MOVD $bias<>(SB), R11")
	n.put("FMOVQ (R11), F%d", biases)
	n.beginPass()
	n.put("MOVD from+24(FP), R11")
	n.put("ADD $Bank_Out, R0, R2")
	n.put("ADD R11<<5, R2, R2")
	n.put("MOVD force+16(FP), R3")
	n.put("ADD R12, R3, R3")
	n.put("MOVD frames+32(FP), R9")
}

// beginPass points to the bank, and to what the second argument is.
func (n neon) beginPass() {
	n.put("MOVD $0, R12")
	n.label("pass")
	n.put("MOVD b+0(FP), R11")
	n.put("ADD R12, R11, R0")
	n.put("ADD R12<<1, R11, R1")
	n.put("MOVD w+8(FP), R11")
	n.put("ADD R12<<1, R11, R7")
	n.put("ADD R12, R11, R13")
	n.put("ADD $Bench_window, R13, R4")
	n.put("ADD $Bench_read, R13, R14")
	n.put("ADD $(Bench_read+%d), R13, R15", 4*floats)
}

func (n neon) beginTurn(name string) {
	n.function(name, "b *Bank, w *Bench", 16)
	n.beginPass()
}

func (n neon) beginMix(name string, banks int) {
	if banks == 1 {
		n.function(name, "b *Bank, w *Mix, from, frames int", 32)
	} else {
		n.function(name, "b *Bank, w *Mix, from, frames int, c *Bank", 40)
	}
	n.beginPass()
	n.put("MOVD from+16(FP), R11")
	n.put("ADD $Bank_Out, R0, R2")
	n.put("ADD R11<<5, R2, R2")
	n.put("ADD R11<<5, R13, R13")
	n.put("MOVD frames+24(FP), R9")
	if banks > 1 {
		n.put("MOVD c+32(FP), R3")
		n.put("ADD R12, R3, R3")
		n.put("ADD $Bank_Out, R3, R4")
		n.put("ADD R11<<5, R4, R4")
	}
}

func (n neon) end() {
	n.put("ADD $16, R12, R12")
	n.put("CMP $32, R12")
	n.put("BNE pass")
	n.put("RET")
}

func (n neon) jump(name string) { n.put("JMP %s", name) }

func (n neon) jumpIfLess(name string, frames int) {
	n.put("CMP $%d, R9", frames)
	n.put("BLT %s", name)
}

func (n neon) jumpIfEqual(name string, frames int) {
	n.put("CMP $%d, R9", frames)
	n.put("BEQ %s", name)
}

func (n neon) rewind(quads int)  { n.put("MOVD $%d, R8", -16*quads) }
func (n neon) advance(group int) { n.put("ADD $%d, R8, R8", 4*group) }

func (n neon) count(frames int) { n.put("SUB $%d, R9, R9", frames) }

func (n neon) point(to pointer, m mem) {
	n.put("MOVD $%s, %s", neonPointers.at(m), neonPointers[to])
}

func (n neon) move(p pointer, bytes int) {
	n.put("ADD $%d, %s, %[2]s", bytes, neonPointers[p])
}

func (n neon) countSections() {
	n.put("MOVD b+0(FP), R11")
	n.put("MOVD Bank_Sections(R11), R10")
}

func (n neon) repeatSections(name string) {
	n.put("SUB $1, R10, R10")
	n.put("CBNZ R10, %s", name)
}

func (n neon) load(d reg, m mem)  { n.put("FMOVQ %s, F%d", neonPointers.at(m), d) }
func (n neon) store(m mem, s reg) { n.put("FMOVQ F%d, %s", s, neonPointers.at(m)) }
func (n neon) copy(d, s reg)      { n.put("VMOV V%d.B16, V%d.B16", s, d) }

// operation is an instruction that the assembler has no name for, with all
// registers zero, as the Arm Architecture Reference Manual for A-profile,
// section C7.2, encodes it.
type operation struct {
	name string // and arrangements, of d first
	code uint32
}

var (
	faddF  = operation{"fadd v%d.4s, v%d.4s, v%d.4s", 0x4e20d400}
	fmulF  = operation{"fmul v%d.4s, v%d.4s, v%d.4s", 0x6e20dc00}
	faddD  = operation{"fadd v%d.2d, v%d.2d, v%d.2d", 0x4e60d400}
	fsubD  = operation{"fsub v%d.2d, v%d.2d, v%d.2d", 0x4ee0d400}
	fmulD  = operation{"fmul v%d.2d, v%d.2d, v%d.2d", 0x6e60dc00}
	fcvtl  = operation{"fcvtl v%d.2d, v%d.2s", 0x0e617800}
	fcvtl2 = operation{"fcvtl2 v%d.2d, v%d.4s", 0x4e617800}
	fcvtn  = operation{"fcvtn v%d.2s, v%d.2d", 0x0e616800}
	fcvtn2 = operation{"fcvtn2 v%d.4s, v%d.2d", 0x4e616800}
)

// word prints an operation on registers: d in bits 0 to 4 of the instruction,
// then from bit 5 on, and from bit 16 on.
func (n neon) word(o operation, registers ...reg) {
	code, names := o.code, []any{}
	for i, r := range registers {
		code |= uint32(r) << [...]int{0, 5, 16}[i]
		names = append(names, r)
	}
	n.put("WORD $%#08x // %s", code, fmt.Sprintf(o.name, names...))
}

// wordM prints d = x op m.
func (n neon) wordM(o operation, d, x reg, m mem) {
	n.load(operand, m)
	n.word(o, d, x, operand)
}

func (n neon) mulF(d, x, y reg)      { n.word(fmulF, d, x, y) }
func (n neon) addF(d, x, y reg)      { n.word(faddF, d, x, y) }
func (n neon) addFm(d, x reg, m mem) { n.wordM(faddF, d, x, m) }
func (n neon) mulFm(d, x reg, m mem) { n.wordM(fmulF, d, x, m) }
func (n neon) mulD(d, x, y reg)      { n.word(fmulD, d, x, y) }
func (n neon) addD(d, x, y reg)      { n.word(faddD, d, x, y) }
func (n neon) subD(d, x, y reg)      { n.word(fsubD, d, x, y) }
func (n neon) addDm(d, x reg, m mem) { n.wordM(faddD, d, x, m) }
func (n neon) mulDm(d, x reg, m mem) { n.wordM(fmulD, d, x, m) }
func (n neon) subDm(d, x reg, m mem) { n.wordM(fsubD, d, x, m) }
func (n neon) addBias(d, x reg)      { n.word(faddF, d, x, biases) }

func (n neon) widen(d, s reg, h half) {
	n.word([...]operation{low: fcvtl, high: fcvtl2}[h], d, s)
}

// narrow goes by way of scratch to the low half, for fcvtn clears the high one.
func (n neon) narrow(d, s, scratch reg, h half) {
	if h == high {
		n.word(fcvtn2, d, s)
		return
	}
	n.word(fcvtn, scratch, s)
	n.put("VMOV V%d.D[0], V%d.D[0]", scratch, d)
}

func (n neon) widenM(d reg, m mem, h half) {
	n.load(operand, m)
	n.widen(d, operand, h)
}

func (n neon) storeHalf(m mem, s, scratch reg, h half) {
	n.word(fcvtn, scratch, s)
	n.put("FMOVD F%d, %s", scratch, neonPointers.at(m.plus(8*int(h))))
}

func (n neon) join(d reg, m mem) { n.load(d, m) }

func (n neon) loadQuad(d, scratch [4]reg, table string) {
	for i, d := range d {
		n.line(table, i)
		n.put("FMOVQ (R11), F%d", d)
	}
	n.transpose(d, scratch)
}

func (n neon) swap() {
	n.put("MOVD R14, R11")
	n.put("MOVD R15, R14")
	n.put("MOVD R11, R15")
}

func (n neon) storeQuad(s, scratch [4]reg, behind int) {
	n.transpose(s, scratch)
	for i, s := range s {
		n.line("target", i)
		n.put("FMOVQ F%d, %d(R11)", s, -16*behind)
	}
}

// line points R11 into one lane's line.
func (n neon) line(table string, lane int) {
	n.put("MOVD (Bench_%s+%d)(R7), R11", table, 8*lane)
	n.put("ADD R8, R11, R11")
}

// transpose turns the rows of the square x into columns.
func (n neon) transpose(x, t [4]reg) {
	n.zip("VZIP1", "S4", t[0], x[0], x[1])
	n.zip("VZIP2", "S4", t[1], x[0], x[1])
	n.zip("VZIP1", "S4", t[2], x[2], x[3])
	n.zip("VZIP2", "S4", t[3], x[2], x[3])
	n.zip("VZIP1", "D2", x[0], t[0], t[2])
	n.zip("VZIP2", "D2", x[1], t[0], t[2])
	n.zip("VZIP1", "D2", x[2], t[1], t[3])
	n.zip("VZIP2", "D2", x[3], t[1], t[3])
}

// zip prints an instruction that takes elements from x and y in turn: the
// assembler names y first.
func (n neon) zip(op, elements string, d, x, y reg) {
	n.put("%s V%d.%[5]s, V%[3]d.%[5]s, V%[4]d.%[5]s", op, y, x, d, elements)
}
