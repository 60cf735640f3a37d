package config

import (
	"bytes"
	"math"
	"os"
	"path/filepath"
	"testing"
)

// The recordings in testdata are from sox 14.4.2, 1000 Hz at 8000 Hz, 0.5 of
// full scale left and 0.25 right; those of 24 and 32 bits are in the
// extensible form:
//
//	sox -D -r 8000 -c 2 -n -b 24 stereo-s24.wav synth 32s sine 1000 sine 1000 remix 1v0.5 2v0.25
func TestLoadSampleAveragesChannels(t *testing.T) {
	for name, within := range map[string]float64{
		"stereo-s16": 1.0 / (1 << 15), "stereo-s24": 1.0 / (1 << 22), "stereo-s32": 1.0 / (1 << 22), "stereo-f32": 1.0 / (1 << 22),
	} {
		s, err := LoadSample(filepath.Join("testdata", name+".wav"))
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if s.Rate != 8000 || len(s.Data) != 32 {
			t.Errorf("%s: %d frames at %d Hz, want 32 at 8000", name, len(s.Data), s.Rate)
		}
		for i, got := range s.Data {
			if want := 0.375 * math.Sin(2*math.Pi*float64(i)/8); math.Abs(float64(got)-want) > within {
				t.Errorf("%s: frame %d is %v, want %v", name, i, got, want)
			}
		}
	}
}

func TestLoadSampleRefuses(t *testing.T) {
	good, err := os.ReadFile("testdata/stereo-f32.wav")
	if err != nil {
		t.Fatal(err)
	}
	at := bytes.Index(good, []byte("data")) + 8
	changed := func(at int, with ...byte) []byte {
		return append(append(append([]byte{}, good[:at]...), with...), good[at+len(with):]...)
	}
	const notWAV = "is not a WAV file, or a broken one; save it again as WAV"
	for name, c := range map[string]struct {
		data []byte
		want string
	}{
		"nothing":            {nil, notWAV},
		"half a head":        {good[:20], notWAV},
		"no data":            {good[:at-8], notWAV},
		"a huge format part": {changed(16, 0xff, 0xff, 0xff, 0xff), notWAV},
		"no channels":        {changed(22, 0, 0), "has 0 channels; allowed is 1 to 32; mix it down"},
		"33 channels":        {changed(22, 33, 0), "has 33 channels; allowed is 1 to 32; mix it down"},
		"a compressed form":  {changed(20, 0x55, 0), "has format 85 with 32 bits; save it with 16, 24 or 32 bits or as 32-bit float"},
		"not a number":       {changed(at, 0, 0, 0xc0, 0x7f), "holds NaN at frame 0; allowed is up to 16 times full scale; save it again"},
		"infinity":           {changed(at+8, 0, 0, 0x80, 0x7f), "holds +Inf at frame 1; allowed is up to 16 times full scale; save it again"},
		"far too loud":       {changed(at, 0, 0, 0, 0x43), "holds 64 at frame 0; allowed is up to 16 times full scale; save it again"},
	} {
		if _, err := decodeSample(c.data); err == nil || err.Error() != c.want {
			t.Errorf("%s: %v; want %s", name, err, c.want)
		}
	}
	for name, want := range map[string]string{
		"eight-bits": "has format 1 with 8 bits; save it with 16, 24 or 32 bits or as 32-bit float",
		"f64":        "has format 3 with 64 bits; save it with 16, 24 or 32 bits or as 32-bit float",
	} {
		if _, err := LoadSample("testdata/" + name + ".wav"); err == nil || err.Error() != want {
			t.Errorf("%s: %v; want %s", name, err, want)
		}
	}
}

// FuzzSample holds that any bytes are a sound recording or an error.
func FuzzSample(f *testing.F) {
	names, err := filepath.Glob("testdata/*.wav")
	if err != nil || len(names) == 0 {
		f.Fatal("no recordings to start from")
	}
	for _, name := range names {
		data, err := os.ReadFile(name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(data)
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		s, err := decodeSample(data)
		if err != nil {
			if s != nil {
				t.Error("a recording came with an error")
			}
			return
		}
		checkSample(t, s)
	})
}

// checkSample holds that a recording is within its bounds.
func checkSample(t *testing.T, s *Sample) {
	t.Helper()
	if s.Rate < lowestSampleRate || s.Rate > highestSampleRate || len(s.Data) == 0 || len(s.Data) > longestSample*s.Rate {
		t.Errorf("%d frames at %d Hz", len(s.Data), s.Rate)
	}
	for i, v := range s.Data {
		if !(math.Abs(float64(v)) <= loudestSample) {
			t.Fatalf("frame %d is %v", i, v)
		}
	}
}
