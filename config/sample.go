package config

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"path/filepath"

	"github.com/go-audio/riff"
	"github.com/go-audio/wav"
)

// Bounds of a recording that a patch names.
const (
	longestSample     = 10 // s
	lowestSampleRate  = 4000
	highestSampleRate = 384000
	mostChannels      = 32
	loudestSample     = 16       // times full scale
	largestSample     = 64 << 20 // bytes: 10 s of two channels at 384 kHz and 64 bits
)

// The codes of a WAV file's format (Microsoft's mmreg.h).
const (
	formatPCM        = 1
	formatFloat      = 3
	formatExtensible = 0xfffe
)

// sample reads the recording that a key names; nil where it names none or a
// broken one.
func (t table) sample(name string) *Sample {
	var file string
	if !t.has(name) || !t.text(name, &file) {
		return nil
	}
	if file == "" {
		t.bad(name, `""`, "a WAV file's name", "write one, or take the line out")
		return nil
	}
	path := file
	if !filepath.IsAbs(path) {
		path = filepath.Join(filepath.Dir(t.path), file)
	}
	s, err := LoadSample(path)
	if err != nil {
		t.say(name, fmt.Sprintf("found %s; %s", quote(file), err))
		return nil
	}
	return s
}

// LoadSample reads a WAV file: 16, 24 or 32 bits or float32, any number of
// channels up to 32, up to 10 s. Channels are averaged.
//
// # Errors
//
// One line that says what is wrong with the file and what to do; it leaves the
// file's name to the caller, who knows it as the player wrote it.
func LoadSample(path string) (*Sample, error) {
	data, err := readUpTo(path, largestSample)
	if err != nil {
		return nil, err
	}
	s, err := decodeSample(data)
	if err != nil {
		return nil, err
	}
	s.Path = path
	return s, nil
}

// decodeSample reads the bytes of a WAV file.
func decodeSample(data []byte) (*Sample, error) {
	format, err := wavFormat(data)
	if err != nil {
		return nil, err
	}
	d := wav.NewDecoder(bytes.NewReader(data))
	d.ReadInfo()
	if d.Err() != nil {
		return nil, errNotWAV
	}
	rate, channels, bits := int(d.SampleRate), int(d.NumChans), int(d.BitDepth)
	float := format == formatFloat && bits == 32
	switch {
	case !float && (format != formatPCM || bits != 16 && bits != 24 && bits != 32):
		return nil, fmt.Errorf("has format %d with %d bits; save it with 16, 24 or 32 bits or as 32-bit float", format, bits)
	case rate < lowestSampleRate || rate > highestSampleRate:
		return nil, fmt.Errorf("has a rate of %d Hz; allowed is %d to %d Hz; convert it", rate, lowestSampleRate, highestSampleRate)
	case channels < 1 || channels > mostChannels:
		return nil, fmt.Errorf("has %d channels; allowed is 1 to %d; mix it down", channels, mostChannels)
	}
	pcm, err := d.FullPCMBuffer()
	if err != nil {
		return nil, errNotWAV
	}
	frames := len(pcm.Data) / channels
	if frames == 0 {
		return nil, errors.New("holds no sound; record it again")
	}
	if frames > longestSample*rate {
		return nil, fmt.Errorf("lasts too long; allowed is up to %d s; cut it", longestSample)
	}
	s := &Sample{Rate: rate, Data: make([]float32, frames)}
	scale := 1 / float64(int64(1)<<(bits-1))
	loudest := 0.0
	for i := range s.Data {
		sum := 0.0
		for _, v := range pcm.Data[i*channels : (i+1)*channels] {
			if float {
				sum += float64(math.Float32frombits(uint32(int32(v))))
			} else {
				sum += float64(v) * scale
			}
		}
		sum /= float64(channels)
		if !(math.Abs(sum) <= loudestSample) { // NaN too
			return nil, fmt.Errorf("holds %v at frame %d; allowed is up to %d times full scale; save it again", sum, i, loudestSample)
		}
		loudest = max(loudest, math.Abs(sum))
		s.Data[i] = float32(sum)
	}
	if loudest == 0 {
		return nil, errors.New("is silent; record it again")
	}
	return s, nil
}

var errNotWAV = errors.New("is not a WAV file, or a broken one; save it again as WAV")

// wavFormat walks the chunks of a WAV file and gives the code of its format,
// that of the sub-format where it is extensible. It refuses a chunk that is
// longer than the file, for which the decoder would make room.
func wavFormat(data []byte) (int, error) {
	r := bytes.NewReader(data)
	p := riff.New(r)
	if err := p.ParseHeaders(); err != nil || p.ID != riff.RiffID || p.Format != riff.WavFormatID {
		return 0, errNotWAV
	}
	format := -1
	for {
		id, size, err := p.IDnSize()
		if err != nil {
			return 0, errNotWAV // no data chunk came
		}
		if id == riff.DataFormatID && format >= 0 {
			return format, nil
		}
		if int64(size) > int64(r.Len()) {
			return 0, errNotWAV
		}
		body := make([]byte, size+size%2)
		if n, err := io.ReadFull(r, body); err != nil && n < int(size) {
			return 0, errNotWAV
		}
		if id != riff.FmtID {
			continue
		}
		const whole, subformatAt = 16, 24
		if len(body) < whole {
			return 0, errNotWAV
		}
		format = int(binary.LittleEndian.Uint16(body))
		if format == formatExtensible && len(body) >= subformatAt+2 {
			format = int(binary.LittleEndian.Uint16(body[subformatAt:]))
		}
	}
}
