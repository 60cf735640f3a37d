package main

import (
	"bufio"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"github.com/go-audio/wav"

	"tautwire/voice/measure"
)

// headerBytes come before the first frame of the WAV files that QEMU writes.
const headerBytes = 44

// take is what a show left behind.
type take struct {
	rate  float64
	sound []float32 // one channel, the mean of the interface's; 1 is full scale
	// marks are places in sound, in frames. The interface is silent, and
	// writes nothing, while nobody plays on it, so they are no times.
	marks map[string]int
	facts map[string]string
	vain  []string // what the guest waited for in vain, in its words
	logs  map[string][]logRecord
	told  map[string]string // what the daemons wrote to their terminal
}

// logRecord is one line of the daemon's log, as far as the judge reads it.
type logRecord struct{ Event, What string }

// readTake reads what is there. The take is good for judging even with an
// error, by which scenarios then fail.
//
// # Errors
//
// Files that are missing or cut short, each named with what it should have been.
func readTake(dir string) (*take, error) {
	t := &take{
		marks: map[string]int{},
		facts: map[string]string{},
		logs:  map[string][]logRecord{},
		told:  map[string]string{},
	}
	return t, errors.Join(
		t.readSound(filepath.Join(dir, "interface.wav")),
		t.readRecord(filepath.Join(dir, "record")),
		t.readLogs(dir),
	)
}

func (t *take) readSound(path string) error {
	f, err := os.Open(path)
	if err != nil {
		return fmt.Errorf("the interface's sound: %w", err)
	}
	defer f.Close()
	pcm, err := wav.NewDecoder(f).FullPCMBuffer()
	if err != nil {
		return fmt.Errorf("the interface's sound, %s: %w", path, err)
	}
	if pcm.SourceBitDepth != 16 || pcm.Format.NumChannels != 2 {
		return fmt.Errorf("the interface's sound, %s: %d bits, %d channels; the interface has 16 bits, 2 channels", path, pcm.SourceBitDepth, pcm.Format.NumChannels)
	}
	t.rate = float64(pcm.Format.SampleRate)
	t.sound = make([]float32, len(pcm.Data)/2)
	for i := range t.sound {
		t.sound[i] = float32(pcm.Data[2*i]+pcm.Data[2*i+1]) / (2 << 15)
	}
	return nil
}

// readRecord reads lines of the forms "mark NAME BYTES CLOCK" and "fact NAME VALUE".
func (t *take) readRecord(path string) error {
	f, err := os.Open(path)
	if err != nil {
		return fmt.Errorf("the guest's record: %w; the guest's console may say why", err)
	}
	defer f.Close()
	lines := bufio.NewScanner(f)
	for lines.Scan() {
		kind, rest, _ := strings.Cut(lines.Text(), " ")
		name, value, _ := strings.Cut(rest, " ")
		switch {
		case kind == "mark":
			place, _, _ := strings.Cut(value, " ")
			bytes, err := strconv.Atoi(place)
			if err != nil {
				return fmt.Errorf("%s: %q has no place in the WAV file", path, lines.Text())
			}
			t.marks[name] = max(0, bytes-headerBytes) / 4
		case kind == "fact" && name == "waited-in-vain":
			t.vain = append(t.vain, value)
		case kind == "fact":
			t.facts[name] = value
		}
	}
	return lines.Err()
}

// readLogs reads every NAME.log and NAME.out; that there are none is for the scenarios to say.
func (t *take) readLogs(dir string) error {
	for _, name := range []string{"stage", "stream", "none"} {
		text, err := os.ReadFile(filepath.Join(dir, name+".log"))
		if err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		for line := range strings.Lines(string(text)) {
			var r logRecord
			if json.Unmarshal([]byte(line), &r) == nil {
				t.logs[name] = append(t.logs[name], r)
			}
		}
		text, err = os.ReadFile(filepath.Join(dir, name+".out"))
		if err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		t.told[name] = string(text)
	}
	return nil
}

// logged counts the records of a log with this event and what.
func (t *take) logged(log, event, what string) (count int) {
	for _, r := range t.logs[log] {
		if r.Event == event && (what == "" || r.What == what) {
			count++
		}
	}
	return count
}

// between is the sound from one mark to another.
//
// # Errors
//
// A mark that the guest never came to.
func (t *take) between(from, to string) ([]float32, error) {
	a, known := t.marks[from]
	b, too := t.marks[to]
	if !known || !too {
		missing := from
		if known {
			missing = to
		}
		return nil, fmt.Errorf("the guest never came to %q", missing)
	}
	return t.sound[min(a, len(t.sound)):max(min(a, len(t.sound)), min(b, len(t.sound)))], nil
}

// level is in dB of full scale, -Inf for silence.
func level(sound []float32) float64 { return measure.RMS(sound) }
