package output

import (
	"bufio"
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
)

// Format is how a WAV file holds its samples.
type Format int

const (
	// Float32 keeps every bit that was rendered, and levels above full scale.
	Float32 Format = iota
	// PCM24 is what every player and editor takes. It is dithered.
	PCM24
)

// WAV writes a stereo RIFF/WAVE file, as it goes: any length up to the 4 GiB that the
// form's sizes can tell.
//
// The form is that of "Multimedia Programming Interface and Data Specifications 1.0"
// (IBM and Microsoft, 1991), with the 18-byte fmt chunk and the fact chunk that
// "New Multimedia Data Types and Data Techniques" (Microsoft, 1994) asks of all that is not
// PCM. go-audio/wav writes neither of these two, and no sizes beyond 4 GiB are refused
// there; the tests read our files with it.
type WAV struct {
	file   io.WriteSeeker
	out    *bufio.Writer
	format Format
	rate   int // Hz
	frames uint64
	dither *rand.Rand
	err    error // that ended the writing
}

const (
	wavChannels = 2
	wavPCM      = 1 // WAVE_FORMAT_PCM
	wavFloat    = 3 // WAVE_FORMAT_IEEE_FLOAT
	pcm24Full   = 1 << 23
)

// NewWAV begins a file of rate frames per second at the start of file, which
// the caller closes after Close.
//
// # Errors
//
// Those of writing.
func NewWAV(file io.WriteSeeker, rate int, format Format) (*WAV, error) {
	w := &WAV{
		file:   file,
		out:    bufio.NewWriterSize(file, 1<<16),
		format: format,
		rate:   rate,
		// Always the same, so that the same sound gives the same file.
		dither: rand.New(rand.NewPCG(24, 1)),
	}
	if _, err := w.out.Write(w.header()); err != nil {
		return nil, fmt.Errorf("WAV header: %w", err)
	}
	return w, nil
}

// Write adds frames, interleaved stereo. Full scale is 1; PCM24 clips above it.
//
// # Errors
//
// Those of writing, and that the file would outgrow 4 GiB, in which case none of these
// frames is written. After an error Close still makes a whole file of
// what came before.
func (w *WAV) Write(frames []float32) error {
	if w.err != nil {
		return w.err
	}
	n := uint64(len(frames) / wavChannels)
	if w.size(w.frames+n) > math.MaxUint32 {
		most := float64(math.MaxUint32/w.frameBytes()) / float64(w.rate)
		return fmt.Errorf("WAV: a file holds 4 GiB at most, %.0f minutes at %d Hz and %d bits: render less, or at a lower rate",
			math.Floor(most/60), w.rate, 8*w.sampleBytes())
	}
	var b [4]byte
	for _, x := range frames {
		switch w.format {
		case Float32:
			binary.LittleEndian.PutUint32(b[:], math.Float32bits(x))
		case PCM24:
			binary.LittleEndian.PutUint32(b[:], uint32(w.quantize(x)))
		}
		if _, err := w.out.Write(b[:w.sampleBytes()]); err != nil {
			w.err = fmt.Errorf("WAV: %w", err)
			return w.err
		}
	}
	w.frames += n
	return nil
}

// Close writes what is buffered, and the sizes into the header. It doesn't close the
// file.
//
// # Errors
//
// Those of writing and seeking.
func (w *WAV) Close() error {
	if err := w.out.Flush(); err != nil {
		return fmt.Errorf("WAV: %w", err)
	}
	if _, err := w.file.Seek(0, io.SeekStart); err != nil {
		return fmt.Errorf("WAV header: %w", err)
	}
	if _, err := w.file.Write(w.header()); err != nil {
		return fmt.Errorf("WAV header: %w", err)
	}
	_, err := w.file.Seek(0, io.SeekEnd)
	return err
}

// quantize rounds to 24 bits with triangular dither of two steps from peak to peak:
// Lipshitz, Wannamaker, Vanderkooy, "Quantization and Dither: A Theoretical Survey",
// JAES 40(5), 1992. Digital silence stays silence.
func (w *WAV) quantize(x float32) int32 {
	if x == 0 || x != x {
		return 0
	}
	dithered := float64(x)*pcm24Full + w.dither.Float64() - w.dither.Float64()
	return int32(max(-pcm24Full, min(pcm24Full-1, math.RoundToEven(dithered))))
}

func (w *WAV) sampleBytes() uint64 {
	if w.format == PCM24 {
		return 3
	}
	return 4
}

func (w *WAV) frameBytes() uint64 { return wavChannels * w.sampleBytes() }

// size returns what the RIFF chunk's size is with that many frames: all that follows it.
func (w *WAV) size(frames uint64) uint64 {
	header := uint64(58)
	if w.format == PCM24 {
		header = 44
	}
	return header - 8 + frames*w.frameBytes()
}

func (w *WAV) header() []byte {
	le := binary.LittleEndian
	var form []byte
	form = append(form, "WAVEfmt "...)
	if w.format == PCM24 {
		form = le.AppendUint32(form, 16)
		form = le.AppendUint16(form, wavPCM)
	} else {
		form = le.AppendUint32(form, 18)
		form = le.AppendUint16(form, wavFloat)
	}
	form = le.AppendUint16(form, wavChannels)
	form = le.AppendUint32(form, uint32(w.rate))
	form = le.AppendUint32(form, uint32(uint64(w.rate)*w.frameBytes()))
	form = le.AppendUint16(form, uint16(w.frameBytes()))
	form = le.AppendUint16(form, uint16(8*w.sampleBytes()))
	if w.format == Float32 {
		form = le.AppendUint16(form, 0) // no extension
		form = append(form, "fact"...)
		form = le.AppendUint32(form, 4)
		form = le.AppendUint32(form, uint32(w.frames))
	}
	form = append(form, "data"...)
	form = le.AppendUint32(form, uint32(w.frames*w.frameBytes()))
	return append(le.AppendUint32([]byte("RIFF"), uint32(w.size(w.frames))), form...)
}
