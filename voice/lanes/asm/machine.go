package main

import (
	"fmt"
	"strings"
)

// reg is a vector register. One holds an f32 of every lane that a pass
// computes; two, the low and the high half of the lanes, an f64.
type reg int

// mem is a vector in memory: a field of a structure of the package lanes, or
// an offset in bytes from a pointer.
type mem struct {
	base  pointer
	field string // as in go_asm.h; "" is none
	off   int
}

func (m mem) plus(bytes int) mem { m.off += bytes; return m }

// pointer is what a general register holds.
type pointer int

const (
	bank   pointer = iota // the Bank, for floats
	bankD                 // the Bank, for doubles
	outs                  // the frame in Bank.Out
	bank2                 // a second Bank that is mixed
	outs2                 // the frame in its Out
	mix                   // the frame in Mix.Left
	force                 // the frame in the Force
	benchF                // the Bench
	sums                  // of a group that is being read, or was last, in Bench.read
	win                   // the group's first frame in Bench.window
	sect                  // the Section
	node                  // the Node before it
)

// registers names the general register of each pointer.
type registers map[pointer]string

func (r registers) at(m mem) string {
	if m.field == "" {
		return fmt.Sprintf("%d(%s)", m.off, r[m.base])
	}
	return fmt.Sprintf("(%s+%d)(%s)", m.field, m.off, r[m.base])
}

// half is which of the lanes of an f32 vector an f64 vector holds.
type half int

const (
	low half = iota
	high
)

// machine prints what a vector unit does. Of three operands the first is the
// destination. d and f tell doubles from floats; m, an operand in memory.
type machine interface {
	goarch() string
	width() int // bytes of a vector

	begin(name string) // takes the arguments and begins a pass
	beginMix(name string, banks int)
	beginTurn(name string)
	end() // ends the pass and returns
	text() *strings.Builder

	label(name string)
	jump(name string)
	jumpIfLess(name string, frames int) // as are left
	jumpIfEqual(name string, frames int)
	rewind(quads int)  // the lines, to so many quads before the first
	advance(group int) // to the next quad in the lines
	count(frames int)  // as done
	point(to pointer, at mem)
	move(p pointer, bytes int)
	countSections()
	repeatSections(name string) // while sections are left

	load(d reg, m mem)
	store(m mem, s reg)
	copy(d, s reg)
	mulF(d, a, b reg)
	addF(d, a, b reg)
	addFm(d, a reg, m mem)
	mulD(d, a, b reg)
	addD(d, a, b reg)
	subD(d, a, b reg)
	addDm(d, a reg, m mem)
	mulDm(d, a reg, m mem)
	subDm(d, a reg, m mem)
	addBias(d, a reg)
	widen(d, s reg, h half)
	narrow(d, s, scratch reg, h half) // the other half of d stays
	widenM(d reg, m mem, h half)      // of an f32 vector in memory
	storeHalf(m mem, s, scratch reg, h half)
	join(d reg, m mem) // what storeHalf stored
	mulFm(d, a reg, m mem)
	loadQuad(d, scratch [4]reg, table string) // of Bench: where each lane's are
	storeQuad(s, scratch [4]reg, behind int)  // groups in the lines; destroys s
	swap()                                    // the two groups of sums
}

// printer is what machines share.
type printer struct{ out strings.Builder }

func (p *printer) text() *strings.Builder { return &p.out }

func (p *printer) put(format string, args ...any) {
	fmt.Fprintf(&p.out, "\t"+format+"\n", args...)
}

func (p *printer) function(name, arguments string, bytes int) {
	fmt.Fprintf(&p.out, "\n// func %s(%s)\nTEXT ·%s(SB), NOSPLIT, $0-%d\n", name, arguments, name, bytes)
}

func (p *printer) label(name string) { fmt.Fprintf(&p.out, "\n%s:\n", name) }
