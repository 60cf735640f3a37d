package output

import (
	"bytes"
	"errors"
	"io"
	"math"
	"os"
	"strings"
	"testing"

	"github.com/go-audio/wav"
)

// readWAV returns the left channel of a file, full scale 1, and its rate.
func readWAV(t *testing.T, path string) ([]float64, int) {
	t.Helper()
	file, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	decoder := wav.NewDecoder(file)
	buffer, err := decoder.FullPCMBuffer()
	if err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	var left []float64
	for i := 0; i < len(buffer.Data); i += buffer.Format.NumChannels {
		left = append(left, float64(buffer.Data[i])/math.Pow(2, float64(decoder.BitDepth)-1))
	}
	return left, buffer.Format.SampleRate
}

func writeWAV(t *testing.T, format Format, frames []float32) string {
	t.Helper()
	path := t.TempDir() + "/bells.wav"
	file, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	w, err := NewWAV(file, 48000, format)
	if err != nil {
		t.Fatal(err)
	}
	// In parts, as it is rendered.
	for len(frames) > 0 {
		n := min(len(frames), 128)
		if err := w.Write(frames[:n]); err != nil {
			t.Fatal(err)
		}
		frames = frames[n:]
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return path
}

func tone(n int) []float32 {
	frames := make([]float32, 2*n)
	for i := range n {
		frames[2*i] = float32(0.9 * math.Sin(2*math.Pi*440*float64(i)/48000))
		frames[2*i+1] = -frames[2*i]
	}
	return frames
}

// The bytes are those of the published form: "Multimedia Programming Interface and
// Data Specifications 1.0" (IBM and Microsoft, 1991), chapter 3, and "New Multimedia
// Data Types and Data Techniques" (Microsoft, 1994) for the fact chunk.
func TestWAVHeaderBytes(t *testing.T) {
	tests := []struct {
		format Format
		want   string
	}{
		{Float32, "RIFF\x4a\x00\x00\x00WAVE" + // 50 of header, 24 of data
			"fmt \x12\x00\x00\x00" + "\x03\x00" + "\x02\x00" + "\x80\xbb\x00\x00" + "\x00\xdc\x05\x00" + "\x08\x00" + "\x20\x00" + "\x00\x00" +
			"fact\x04\x00\x00\x00" + "\x03\x00\x00\x00" +
			"data\x18\x00\x00\x00" +
			"\x00\x00\x80\x3f\x00\x00\x80\xbf" + "\x00\x00\x00\x3f\x00\x00\x00\x00" + "\x00\x00\x00\x40\x00\x00\x80\x3e"},
		{PCM24, "RIFF\x36\x00\x00\x00WAVE" + // 36 of header, 18 of data
			"fmt \x10\x00\x00\x00" + "\x01\x00" + "\x02\x00" + "\x80\xbb\x00\x00" + "\x00\x65\x04\x00" + "\x06\x00" + "\x18\x00" +
			"data\x12\x00\x00\x00"},
	}
	for _, test := range tests {
		path := writeWAV(t, test.format, []float32{1, -1, 0.5, 0, 2, 0.25})
		got, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		if !bytes.HasPrefix(got, []byte(test.want)) {
			t.Errorf("format %d:\n got %q\nwant %q", test.format, got, test.want)
		}
		if riff := int(got[4]) + 8; riff != len(got) {
			t.Errorf("format %d: the header tells %d bytes of %d", test.format, riff, len(got))
		}
	}
}

func TestWAVReadBack(t *testing.T) {
	want := tone(10000)
	t.Run("24 bit", func(t *testing.T) {
		file, err := os.Open(writeWAV(t, PCM24, want))
		if err != nil {
			t.Fatal(err)
		}
		defer file.Close()
		d := wav.NewDecoder(file)
		buffer, err := d.FullPCMBuffer()
		if err != nil {
			t.Fatal(err)
		}
		if d.WavAudioFormat != 1 || d.BitDepth != 24 || d.NumChans != 2 || d.SampleRate != 48000 || len(buffer.Data) != len(want) {
			t.Fatalf("format %d, %d bits, %d channels, %d Hz, %d samples", d.WavAudioFormat, d.BitDepth, d.NumChans, d.SampleRate, len(buffer.Data))
		}
		var sum, square float64
		for i, x := range want {
			e := float64(buffer.Data[i]) - float64(x)*pcm24Full
			if math.Abs(e) > 1.5 {
				t.Fatalf("sample %d is off by %v steps", i, e)
			}
			sum += e
			square += e * e
		}
		// Triangular dither and rounding: variance 1/6 + 1/12 = 1/4 of a step squared, mean 0.
		n := float64(len(want))
		if mean, variance := sum/n, square/n; math.Abs(mean) > 0.02 || math.Abs(variance-0.25) > 0.01 {
			t.Errorf("dithered error: mean %.3f, variance %.3f steps squared; want 0 and 0.25", mean, variance)
		}
	})
	t.Run("float", func(t *testing.T) {
		file, err := os.Open(writeWAV(t, Float32, want))
		if err != nil {
			t.Fatal(err)
		}
		defer file.Close()
		d := wav.NewDecoder(file)
		if err := d.FwdToPCM(); err != nil {
			t.Fatal(err)
		}
		if d.WavAudioFormat != 3 || d.BitDepth != 32 || d.NumChans != 2 || d.SampleRate != 48000 || d.PCMSize != 4*len(want) {
			t.Fatalf("format %d, %d bits, %d channels, %d Hz, %d bytes", d.WavAudioFormat, d.BitDepth, d.NumChans, d.SampleRate, d.PCMSize)
		}
		data, err := io.ReadAll(d.PCMChunk)
		if err != nil {
			t.Fatal(err)
		}
		for i, x := range want {
			bits := uint32(data[4*i]) | uint32(data[4*i+1])<<8 | uint32(data[4*i+2])<<16 | uint32(data[4*i+3])<<24
			if bits != math.Float32bits(x) {
				t.Fatalf("sample %d is %v, want %v", i, math.Float32frombits(bits), x)
			}
		}
	})
}

func TestWAVIsTheSameEachTime(t *testing.T) {
	frames := tone(1000)
	for _, format := range []Format{Float32, PCM24} {
		first, err := os.ReadFile(writeWAV(t, format, frames))
		if err != nil {
			t.Fatal(err)
		}
		second, err := os.ReadFile(writeWAV(t, format, frames))
		if err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(first, second) {
			t.Errorf("format %d: two files of the same sound differ", format)
		}
	}
}

func TestPCM24Extremes(t *testing.T) {
	nan := float32(math.NaN())
	inf := float32(math.Inf(1))
	tests := []struct {
		x         float32
		low, high int32
	}{
		{0, 0, 0},
		{nan, 0, 0},
		{1, pcm24Full - 2, pcm24Full - 1},
		{7, pcm24Full - 1, pcm24Full - 1},
		{inf, pcm24Full - 1, pcm24Full - 1},
		{-1, -pcm24Full, -pcm24Full + 1},
		{-inf, -pcm24Full, -pcm24Full},
	}
	w, err := NewWAV(&countingFile{}, 48000, PCM24)
	if err != nil {
		t.Fatal(err)
	}
	for _, test := range tests {
		for range 100 {
			if q := w.quantize(test.x); q < test.low || q > test.high {
				t.Errorf("%v becomes %d, want %d to %d", test.x, q, test.low, test.high)
				break
			}
		}
	}
}

func TestWAVRefusesMoreThan4GiB(t *testing.T) {
	for _, format := range []Format{Float32, PCM24} {
		w, err := NewWAV(&countingFile{}, 48000, format)
		if err != nil {
			t.Fatal(err)
		}
		// As if so many had been written.
		w.frames = (math.MaxUint32 - 50) / w.frameBytes()
		frames := make([]float32, 2)
		before := w.frames
		for w.size(w.frames+1) <= math.MaxUint32 {
			if err := w.Write(frames); err != nil {
				t.Fatalf("format %d: %d frames: %v", format, w.frames, err)
			}
		}
		err = w.Write(frames)
		if err == nil || !strings.Contains(err.Error(), "4 GiB") || !strings.Contains(err.Error(), "minutes") {
			t.Errorf("format %d: error %v", format, err)
		}
		if w.frames < before || w.frames > before+8 {
			t.Errorf("format %d: %d frames, begun at %d", format, w.frames, before)
		}
		if err := w.Close(); err != nil {
			t.Errorf("format %d: Close: %v", format, err)
		}
	}
}

func TestWAVTellsWriteErrors(t *testing.T) {
	full := errors.New("no space left on device")
	w, err := NewWAV(&countingFile{most: 100, err: full}, 48000, Float32)
	if err != nil {
		t.Fatal(err)
	}
	err = w.Write(make([]float32, 1<<17))
	if !errors.Is(err, full) {
		t.Errorf("Write: %v", err)
	}
	if again := w.Write(make([]float32, 2)); !errors.Is(again, full) {
		t.Errorf("Write again: %v", again)
	}
	if err := w.Close(); !errors.Is(err, full) {
		t.Errorf("Close: %v", err)
	}
}

// countingFile keeps nothing, and fails with err after most bytes, if most is not 0.
type countingFile struct {
	n, most int
	err     error
}

func (f *countingFile) Write(b []byte) (int, error) {
	f.n += len(b)
	if f.most > 0 && f.n > f.most {
		return 0, f.err
	}
	return len(b), nil
}

func (f *countingFile) Seek(int64, int) (int64, error) { return 0, nil }

func BenchmarkWAV(b *testing.B) {
	frames := tone(4096)
	for name, format := range map[string]Format{"float": Float32, "24bit": PCM24} {
		b.Run(name, func(b *testing.B) {
			w, err := NewWAV(&countingFile{}, 48000, format)
			if err != nil {
				b.Fatal(err)
			}
			for b.Loop() {
				w.frames = 0
				w.Write(frames)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/4096, "ns/frame")
		})
	}
}
