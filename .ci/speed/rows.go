package main

// row is a line of the table: a figure, as a multiple of a reference where there is one.
type row struct {
	name       string
	of         figure
	reference  figure  // nil: the figure itself is bounded
	rounds     int     // 0 is as many as asked for; fewer where a round takes long
	bound, aim float64 // 0 is none
	kernel     string  // the bound is for this kernel, "" is any
}

const (
	same  = control("12") // the arithmetic of the program
	usual = control("8")
)

var (
	plain = ofVoice("PlainString")
	crowd = strung(128)
	quiet = ofEngine("Periods/64", "ns/frame")
)

var rows = []row{
	{name: "control, C, of the same arithmetic", of: same, reference: same},
	{name: "control, C, 8 taps in single precision", of: usual, reference: same},
	{name: "plain string / control", of: plain, reference: same, bound: 0.30, aim: 0.20, kernel: "AVX2"},
	{name: "plain string / control of 8 taps", of: plain, reference: usual, aim: 0.20},
	{name: "plain string, portable / control", of: ofVoice("PortableString"), reference: same, bound: 1},
	{name: "full string, each loop / control", of: ofVoice("FullString"), reference: same, bound: 0.50, aim: 0.35},
	{name: "bending string / plain string", of: ofVoice("BendingString"), reference: plain, bound: 2},
	{name: "1 string / 128", of: strung(1), reference: crowd},
	{name: "8 strings / 128", of: strung(8), reference: crowd},
	{name: "32 strings / 128", of: strung(32), reference: crowd},
	{name: "64 strings / 128", of: strung(64), reference: crowd, bound: 1.5},
	{name: "256 strings / 128", of: strung(256), reference: crowd, bound: 1.5},
	{name: "512 strings / 128", of: strung(512), reference: crowd, bound: 1.5},
	{name: "a further string, 128 to 512 / 8 to 128", of: more{128, 512}, reference: more{8, 128}, bound: 1.5},
	{name: "512 low strings / 512 of all keys", of: ofVoice("LowStrings"), reference: strung(512), bound: 1.5},
	{name: "strings that have died / sounding ones", of: ofVoice("DyingString"), reference: plain, bound: 1.5},
	{name: "strings of subnormal numbers / sounding ones", of: ofVoice("SubnormalStrings"), reference: plain, bound: 1.5},
	{name: "63 frames / 64, a frame", of: ofEngine("Periods/63", "ns/frame"), reference: quiet, bound: 1.5},
	{name: "441 frames / 64, a frame", of: ofEngine("Periods/441", "ns/frame"), reference: quiet, bound: 1.5},
	{name: "silence, % of a core", of: ofEngine("Silence/never_played", "%load"), bound: 1},
	{name: "silence after a stage, % of a core", of: ofEngine("Silence/died_away", "%load"), bound: 1},
	{name: "128 keys struck in a period of 64, % of it", of: ofEngine("Burst", "%period"), bound: 100},
	{name: "full stage of 128, % of a core", of: ofEngine("Stage", "%load"), bound: 25},
	{name: "full stage, each loop", of: ofEngine("Stage", "ns/string-sample")},
	{name: "full stage, strings a core", of: ofEngine("Stage", "strings/core")},
	{name: "full stage in JACK, 99.9th percentile, % of a period", of: ofProgram("StageInJack", "%period"), rounds: 1, bound: 25},
	{name: "compiling a patch, plain, ms", of: ofEngine("Compile/stays", "ms/patch"), bound: 50},
	{name: "compiling a patch, everything, ms", of: ofEngine("Compile/stiff,_two_planes,_courses", "ms/patch"), bound: 50},
	{name: "from exec to ready, ms", of: ofProgram("Start/play", "ms/start"), rounds: 5, bound: 300},
	{name: "resident memory at most, MB", of: ofProgram("ResidentMemory", "MB"), rounds: 1, bound: 64},
}
