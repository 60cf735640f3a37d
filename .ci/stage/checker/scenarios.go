package main

import (
	"errors"
	"fmt"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"

	"tautwire/voice/measure"
)

const (
	// settle is how long after a stroke the judge listens, in s: the daemon's periods and
	// the interface's queue come first.
	settle = 0.15
	// mistuned is what the pitch may be off, in cents, before the judge calls it another
	// pitch. A patch may have courses and second planes that beat; voice has the exact tests.
	mistuned = 10.0
	// near is how far around a fundamental, in cents, its peak is looked for.
	near = 80.0
	// faint is the level, in dB, below which a fundamental does not count as heard.
	faint = -60.0
	// apart is how many dB the octave below a key lies under its fundamental, or it is
	// the octave below that was played.
	apart = 20.0
	// ended is how many dB a chord must fall in the seconds after its keyboard
	// has gone: a released string falls by 60 in its release time.
	ended = 50.0
	// prompt is how long the daemon may take to end, in s.
	prompt = 1.5
)

// scenario is a thing that the stage must show.
type scenario struct {
	name string
	// judge says what was measured, or why it failed.
	judge func(t *take) (found string, err error)
}

// scenarios are what guest/scenarios plays, which has the marks and the facts.
func scenarios() []scenario {
	return []scenario{
		{"a keyboard plugged in after the start is heard", func(t *take) (string, error) {
			return heard(t, map[string][]int{"key-30": {48}, "key-3C": {60}, "key-45": {69}, "key-54": {84}, "chord": {48, 55, 64}})
		}},
		{"a keyboard pulled out in mid-chord leaves no note", pulledOut},
		{"a keyboard plugged in again is heard", func(t *take) (string, error) {
			return heard(t, map[string][]int{"again": {72}})
		}},
		{"another program plays on the port", func(t *take) (string, error) {
			if got := t.facts["tune-exit"]; got != "0" {
				return "", fmt.Errorf("aplaymidi -p tautwire ended with status %q", got)
			}
			return heard(t, map[string][]int{"tune": {75}})
		}},
		{"the audio interface pulled out and plugged in again is played on", regained},
		{"SIGTERM ends it promptly, the last notes faded", endsPromptly},
		{"a byte stream is heard", func(t *take) (string, error) {
			found, err := heard(t, map[string][]int{"stream": {74}})
			return found, errors.Join(err, stopped(t, "stream"))
		}},
		{"no sound device: it says so and fails", noDevice},
	}
}

// heard says that at each mark, until the mark's end, the keys of equal
// temperament on A4 = 440 Hz sound.
func heard(t *take, wanted map[string][]int) (string, error) {
	var worst float64
	var problems []error
	count := 0
	for _, mark := range slices.Sorted(maps.Keys(wanted)) {
		keys := wanted[mark]
		sound, err := t.between(mark, mark+"-end")
		if err != nil {
			problems = append(problems, err)
			continue
		}
		sound = sound[min(len(sound), int(settle*t.rate)):]
		spectrum := measure.NewSpectrum(sound, t.rate)
		for _, key := range keys {
			cents, err := hear(spectrum, key, len(keys) > 1)
			if err != nil {
				problems = append(problems, fmt.Errorf("at %q, key %d: %w", mark, key, err))
				continue
			}
			worst = math.Max(worst, math.Abs(cents))
			count++
		}
	}
	return fmt.Sprintf("%d keys within %.2f cent", count, worst), errors.Join(problems...)
}

// hear says how many cents the key is off in the spectrum, by the highest peak near
// its fundamental. A spectrum sees a string's two planes, or its course, as the one
// pitch that a listener hears, within a cent or two.
func hear(spectrum measure.Spectrum, key int, chord bool) (cents float64, err error) {
	f0 := 440 * math.Exp2(float64(key-69)/12)
	peak, at := spectrum.Peak(measure.Shift(f0, -near), measure.Shift(f0, near))
	if at < faint {
		return 0, fmt.Errorf("%.1f Hz is at %.0f dB; %.0f dB is the least to be heard", f0, at, faint)
	}
	peak = between(spectrum, peak)
	if cents = measure.Cents(peak, f0); math.Abs(cents) > mistuned {
		return 0, fmt.Errorf("%.1f Hz is heard instead of %.1f, %+.0f cents off", peak, f0, cents)
	}
	if _, below := spectrum.Peak(measure.Shift(f0/2, -near), measure.Shift(f0/2, near)); !chord && below > at-apart {
		return 0, fmt.Errorf("the octave below, %.1f Hz, is at %.0f dB, %.1f Hz itself at %.0f dB", f0/2, below, f0, at)
	}
	return cents, nil
}

// between is where the top of a peak at the bin of hz lies: that of the parabola
// through the bin and its neighbours.
func between(s measure.Spectrum, hz float64) float64 {
	i := int(math.Round(hz / s.Step))
	if i < 1 || i+1 >= len(s.DB) {
		return hz
	}
	low, top, high := s.DB[i-1], s.DB[i], s.DB[i+1]
	if !(low < top && high < top) { // the slope of a peak elsewhere
		return hz
	}
	return hz + s.Step*(low-high)/(2*(low+high-2*top))
}

func pulledOut(t *take) (string, error) {
	if _, err := heard(t, map[string][]int{"held": {52, 59, 68}}); err != nil {
		return "", err
	}
	before, err := t.between("held", "held-end")
	if err != nil {
		return "", err
	}
	after, err := t.between("held-end", "pulled")
	if err != nil {
		return "", err
	}
	tenth := int(t.rate / 10)
	if len(before) < tenth || len(after) < 10*tenth {
		return "", fmt.Errorf("%.2f s of sound are there before and %.2f s after; the daemon stopped playing", float64(len(before))/t.rate, float64(len(after))/t.rate)
	}
	fall := math.Min(200, level(before[len(before)-tenth:])-level(after[len(after)-tenth:]))
	if fall < ended {
		return "", fmt.Errorf("the chord fell by %.0f dB in %.1f s; %.0f dB is the least: notes hang", fall, float64(len(after))/t.rate, ended)
	}
	if n := t.logged("stage", "port", "lost"); n == 0 {
		return "", errors.New("the log has no record of the lost port")
	}
	return fmt.Sprintf("it fell by %.0f dB in %.1f s", fall, float64(len(after))/t.rate), nil
}

func regained(t *take) (string, error) {
	if t.facts["survived"] != "yes" {
		return "", fmt.Errorf("the daemon did not survive; it said: %s", lastLine(t.told["stage"]))
	}
	for _, what := range []string{"lost", "regained"} {
		if t.logged("stage", "device", what) == 0 {
			return "", fmt.Errorf("the log has no record of the device %s", what)
		}
	}
	return heard(t, map[string][]int{"regained": {65}})
}

func endsPromptly(t *take) (string, error) {
	if err := stopped(t, "stage"); err != nil {
		return "", err
	}
	if _, err := heard(t, map[string][]int{"last": {54}}); err != nil {
		return "", err
	}
	sound, err := t.between("last", "ended")
	if err != nil {
		return "", err
	}
	before, err := t.between("last", "last-end")
	if err != nil {
		return "", err
	}
	hundredth := int(t.rate / 100)
	if len(before) < 10*hundredth {
		return "", errors.New("nothing was playing when it ended")
	}
	fall := math.Min(200, level(before[len(before)-10*hundredth:])-level(sound[len(sound)-hundredth:]))
	if fall < apart {
		return "", fmt.Errorf("the last note was cut off %.0f dB below where it was", fall)
	}
	return fmt.Sprintf("%s s, faded by %.0f dB", t.facts["stage-seconds"], fall), nil
}

// stopped says that the daemon of that name ended when it was asked to.
func stopped(t *take, name string) error {
	if got := t.facts[name+"-exit"]; got != "0" {
		return fmt.Errorf("the daemon ended with status %q, not 0; it said: %s", got, lastLine(t.told[name]))
	}
	seconds, err := strconv.ParseFloat(t.facts[name+"-seconds"], 64)
	if err != nil || seconds > prompt {
		return fmt.Errorf("the daemon took %q s to end; %.1f s is the most", t.facts[name+"-seconds"], prompt)
	}
	return nil
}

func noDevice(t *take) (string, error) {
	if got := t.facts["none-exit"]; got != "1" {
		return "", fmt.Errorf("it ended with status %q, not 1; it said: %s", got, lastLine(t.told["none"]))
	}
	said := lastLine(t.told["none"])
	if said == "" {
		return "", errors.New("it failed without a word")
	}
	return fmt.Sprintf("%q", said), nil
}

func lastLine(text string) string {
	text = strings.TrimSpace(text)
	return text[strings.LastIndex(text, "\n")+1:]
}
