package midiin

import (
	"bytes"
	"encoding/hex"
	"fmt"
	"slices"
	"strings"
	"testing"
)

// told is a message with its time, in a form that compares.
type told struct {
	time  int64
	bytes string
}

func unhex(t testing.TB, s string) []byte {
	t.Helper()
	b, err := hex.DecodeString(strings.ReplaceAll(s, " ", ""))
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// decodeTimed gives byte i the time i.
func decodeTimed(d *Decoder, b []byte) (got []told) {
	for i, c := range b {
		d.Byte(c, int64(i), func(m Message) { got = append(got, told{m.Time, fmt.Sprintf("% X", m.Bytes())}) })
	}
	return got
}

// Sources: MIDI 1.0 Detailed Specification 4.2: "Running Status", "System Real Time Messages",
// "System Exclusive", "Undefined", and table I for lengths.
func TestDecoder(t *testing.T) {
	tests := []struct {
		name, in string
		want     []told
		dropped  uint64
		cut      uint64
	}{
		{"note on", "90 3C 40", []told{{0, "90 3C 40"}}, 0, 0},
		{"every channel message", "80 3C 40 90 3C 40 A0 3C 40 B0 07 64 C0 05 D0 33 E0 00 40",
			[]told{{0, "80 3C 40"}, {3, "90 3C 40"}, {6, "A0 3C 40"}, {9, "B0 07 64"}, {12, "C0 05"}, {14, "D0 33"}, {16, "E0 00 40"}}, 0, 0},
		{"running status: the time is the first data byte's", "90 3C 40 3C 00 3E 40",
			[]told{{0, "90 3C 40"}, {3, "90 3C 00"}, {5, "90 3E 40"}}, 0, 0},
		{"running status of two bytes", "C3 05 06", []told{{0, "C3 05"}, {2, "C3 06"}}, 0, 0},
		{"real-time inside a message", "90 F8 3C FE 40", []told{{1, "F8"}, {3, "FE"}, {0, "90 3C 40"}}, 0, 0},
		{"real-time keeps running status", "90 3C 40 F8 3E 41", []told{{0, "90 3C 40"}, {3, "F8"}, {4, "90 3E 41"}}, 0, 0},
		{"real-time inside running status", "90 3C 40 3E FA 41", []told{{0, "90 3C 40"}, {4, "FA"}, {3, "90 3E 41"}}, 0, 0},
		{"real-time inside exclusive", "F0 7E F8 7F F7", []told{{2, "F8"}, {0, "F0 7E 7F F7"}}, 0, 0},
		{"undefined real-time is ignored and disturbs nothing", "90 F9 3C FD 40 3E 41", []told{{0, "90 3C 40"}, {5, "90 3E 41"}}, 2, 0},
		{"system reset passes", "FF", []told{{0, "FF"}}, 0, 0},
		{"stray data", "3C 40 90 3C 40", []told{{2, "90 3C 40"}}, 2, 0},
		{"status cuts a message", "90 3C 80 3C 40", []told{{2, "80 3C 40"}}, 2, 0},
		{"status cuts a running one", "90 3C 40 3E 80 3C 40", []told{{0, "90 3C 40"}, {4, "80 3C 40"}}, 1, 0},
		{"status alone is cut", "90 80 3C 40", []told{{1, "80 3C 40"}}, 1, 0},
		{"system common ends running status", "90 3C 40 F3 01 3C 40", []told{{0, "90 3C 40"}, {3, "F3 01"}}, 2, 0},
		{"quarter frame, position, song, tune request", "F1 12 F2 01 02 F3 04 F6", []told{{0, "F1 12"}, {2, "F2 01 02"}, {5, "F3 04"}, {7, "F6"}}, 0, 0},
		{"tune request ends running status", "90 3C 40 F6 3C 40", []told{{0, "90 3C 40"}, {3, "F6"}}, 2, 0},
		{"undefined common ends running status", "90 3C 40 F4 3C 40 F5 3C", []told{{0, "90 3C 40"}}, 5, 0},
		{"exclusive", "F0 43 12 00 F7", []told{{0, "F0 43 12 00 F7"}}, 0, 0},
		{"exclusive ends running status", "90 3C 40 F0 43 F7 3C 40", []told{{0, "90 3C 40"}, {3, "F0 43 F7"}}, 2, 0},
		{"exclusive ended by a status", "F0 43 12 90 3C 40", []told{{0, "F0 43 12"}, {3, "90 3C 40"}}, 0, 1},
		{"exclusive ended by exclusive", "F0 43 F0 44 F7", []told{{0, "F0 43"}, {2, "F0 44 F7"}}, 0, 1},
		{"exclusive ended by tune request", "F0 43 F6", []told{{0, "F0 43"}, {2, "F6"}}, 0, 1},
		{"end without a start", "F7 90 3C 40", []told{{1, "90 3C 40"}}, 1, 0},
		{"end cuts a message and running status", "90 3C F7 40 3C", nil, 5, 0},
		{"nothing", "", nil, 0, 0},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			var d Decoder
			if got := decodeTimed(&d, unhex(t, tt.in)); !slices.Equal(got, tt.want) {
				t.Errorf("got %v\nwant %v", got, tt.want)
			}
			if d.Dropped != tt.dropped || d.Cut != tt.cut {
				t.Errorf("dropped %d, cut %d; want %d, %d", d.Dropped, d.Cut, tt.dropped, tt.cut)
			}
		})
	}
}

// A dump for another device fills no memory, and what follows is heard.
func TestDecoderLongExclusive(t *testing.T) {
	for _, extra := range []int{-1, 0, 1, 100000} {
		var d Decoder
		in := append([]byte{0xF0}, bytes.Repeat([]byte{1}, MaxSysEx-2+extra)...)
		in = append(in, 0xF7, 0x90, 0x3C, 0x40)
		got := decodeTimed(&d, in)
		want, dropped := 2, 0
		if extra > 0 {
			want, dropped = 1, MaxSysEx+extra
		}
		if len(got) != want || got[len(got)-1].bytes != "90 3C 40" || d.Dropped != uint64(dropped) {
			t.Errorf("%+d bytes: %d messages, dropped %d; want %d, %d", extra, len(got), d.Dropped, want, dropped)
		}
		if cap(d.message) > 2*MaxSysEx {
			t.Errorf("%+d bytes: kept %d bytes of room", extra, cap(d.message))
		}
	}
}

func TestDecoderReset(t *testing.T) {
	var d Decoder
	decodeTimed(&d, unhex(t, "90 3C 40 3E"))
	d.Reset()
	if got := decodeTimed(&d, unhex(t, "40 3C 40")); got != nil || d.Dropped != 4 {
		t.Errorf("after Reset: %v, dropped %d; want none, 4", got, d.Dropped)
	}
}

// Properties of any bytes: every split gives the same; real-time bytes inserted anywhere change
// nothing else; every byte is in a message, implied by running status, or counted; messages are whole.
func FuzzDecoder(f *testing.F) {
	for _, seed := range []string{
		"90 3C 40 3C 00", "F0 7F 7F 04 01 00 40 F7", "F0 43 90 3C 40", "B0 65 00 64 00 06 0C 26 00",
		"90 F8 3C F8 40 F8", "F4 3C F5 F6 F7 F9 FD FE FF", "E0 00 40 7F 7F", "C0 01 02 D0 03 F2 01 02 03",
	} {
		f.Add(unhex(f, seed), uint16(3), byte(0xF8))
	}
	f.Fuzz(func(t *testing.T, in []byte, at uint16, realTime byte) {
		var whole Decoder
		want := decodeTimed(&whole, in)

		var parts Decoder
		var got []string
		cut := int(at) % (len(in) + 1)
		collect := func(m Message) { got = append(got, fmt.Sprintf("% X", m.Bytes())) }
		parts.Write(in[:cut], 0, collect)
		parts.Write(in[cut:], 1, collect)
		if !slices.Equal(got, texts(want)) || parts.Dropped != whole.Dropped {
			t.Errorf("split at %d: %v, want %v", cut, got, texts(want))
		}

		var disturbed Decoder
		realTime |= 0xF8
		mixed := slices.Insert(slices.Clone(in), cut, realTime)
		others := without(texts(decodeTimed(&disturbed, mixed)), fmt.Sprintf("%02X", realTime))
		if plain := without(texts(want), fmt.Sprintf("%02X", realTime)); !slices.Equal(others, plain) {
			t.Errorf("%02X inserted at %d: %v, want %v", realTime, cut, others, plain)
		}

		seen, latest := int(whole.Dropped)+len(whole.message)+whole.excess, int64(0)
		if len(whole.message) > 0 && whole.implied {
			seen--
		}
		for _, m := range want {
			b := unhex(t, m.bytes)
			seen += len(b)
			if in[m.time] != b[0] {
				seen-- // its status byte was implied
			}
			if b[0] < 0xF8 {
				if m.time < latest {
					t.Errorf("time went back to %d from %d", m.time, latest)
				}
				latest = m.time
			}
			if n := messageLength(b[0]); b[0] < 0xF8 && n > 0 && len(b) != n {
				t.Errorf("% X has %d bytes, want %d", b, len(b), n)
			}
		}
		if seen != len(in) {
			t.Errorf("%d bytes accounted for, of %d", seen, len(in))
		}
	})
}

func texts(messages []told) (s []string) {
	for _, m := range messages {
		s = append(s, m.bytes)
	}
	return s
}

func without(s []string, drop string) (kept []string) {
	for _, m := range s {
		if m != drop {
			kept = append(kept, m)
		}
	}
	return kept
}

// BenchmarkDecoder reports the cost of a note's six bytes, on and off.
func BenchmarkDecoder(b *testing.B) {
	var d Decoder
	note := []byte{0x90, 0x3C, 0x40, 0x80, 0x3C, 0x40}
	messages := 0
	count := func(Message) { messages++ }
	b.ReportAllocs()
	for b.Loop() {
		d.Write(note, 0, count)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(messages), "ns/message")
}
