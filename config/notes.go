package config

import (
	"errors"
	"fmt"
	"strconv"
	"strings"
)

// lastKey is MIDI's highest key.
const lastKey = 127

// semitones of the letters C to B above C; indexed by letter - 'A'.
const lettersAboveC = "\x09\x0b\x00\x02\x04\x05\x07"

// KeyName is the name of a MIDI key with C4 as key 60: "F#3", "C-1". Keys
// between naturals are named as sharps.
func KeyName(key int) string {
	names := [12]string{"C", "C#", "D", "D#", "E", "F", "F#", "G", "G#", "A", "A#", "B"}
	octave, step := key/12, key%12
	if step < 0 {
		octave, step = octave-1, step+12
	}
	return names[step] + strconv.Itoa(octave-1)
}

// KeysName is the name of a range of keys, "C2-B3", as zone.keys takes it.
func KeysName(low, high int) string {
	if low == high {
		return KeyName(low)
	}
	return KeyName(low) + "-" + KeyName(high)
}

// ParseKey reads one key: a name with its octave ("A4", "F#3", "Bb2"; C4 is
// key 60, the lowest is C-1 and the highest G9) or a number from 0 to 127.
//
// # Errors
//
// A text that is neither, or a key outside 0 to 127.
func ParseKey(text string) (int, error) {
	key, rest, err := leadingKey(strings.TrimSpace(text))
	if err != nil {
		return 0, err
	}
	if rest != "" {
		return 0, fmt.Errorf("%s is not a key", quote(text))
	}
	return key, nil
}

// parseKeys reads a zone's keys: one key, or two with a hyphen between.
func parseKeys(text string) (low, high int, err error) {
	text = strings.TrimSpace(text)
	if text == "" {
		return 0, 0, errors.New("no key is named")
	}
	low, rest, err := leadingKey(text)
	if err != nil {
		return 0, 0, err
	}
	rest = strings.TrimSpace(rest)
	if rest == "" {
		return low, low, nil
	}
	last, ok := strings.CutPrefix(rest, "-")
	if !ok {
		return 0, 0, fmt.Errorf("%s follows the first key", quote(rest))
	}
	high, err = ParseKey(last)
	if err != nil {
		return 0, 0, err
	}
	if high < low {
		return 0, 0, fmt.Errorf("%s lies below %s", KeyName(high), KeyName(low))
	}
	return low, high, nil
}

// leadingKey reads the key at the start of a text and gives back what follows.
func leadingKey(text string) (key int, rest string, err error) {
	if text == "" {
		return 0, "", errors.New("a key is missing")
	}
	if text[0] >= '0' && text[0] <= '9' {
		n := digits(text)
		return inKeys(text[:n], text[:n], 0, text[n:])
	}
	letter := text[0] &^ 0x20
	if letter < 'A' || letter > 'G' {
		return 0, "", fmt.Errorf("%s is not a key", quote(text))
	}
	step := int(lettersAboveC[letter-'A'])
	rest = text[1:]
	for _, a := range []struct {
		sign string
		by   int
	}{{"#", 1}, {"♯", 1}, {"b", -1}, {"♭", -1}} {
		if after, ok := strings.CutPrefix(rest, a.sign); ok {
			step, rest = step+a.by, after
			break
		}
	}
	n := 0
	if strings.HasPrefix(rest, "-") {
		n = 1
	}
	n += digits(rest[n:])
	if n == 0 || rest[:n] == "-" {
		return 0, "", fmt.Errorf("%s has no octave", quote(text))
	}
	octave, rest := rest[:n], rest[n:]
	return inKeys(text[:len(text)-len(rest)], octave, 12+step, rest)
}

// inKeys makes a key of a written number: itself when base is 0, else an
// octave above base.
func inKeys(name, number string, base int, rest string) (int, string, error) {
	n, err := strconv.Atoi(number)
	if err == nil && base != 0 && n >= -2 && n <= 10 {
		n = base + 12*n
	}
	if err != nil || n < 0 || n > lastKey {
		return 0, "", fmt.Errorf("%s lies outside C-1 to G9 (0 to 127)", name)
	}
	return n, rest, nil
}

// digits counts the decimal digits at the start of a text.
func digits(text string) int {
	n := 0
	for n < len(text) && text[n] >= '0' && text[n] <= '9' {
		n++
	}
	return n
}
