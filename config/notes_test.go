package config

import "testing"

func TestParseKey(t *testing.T) {
	// Common practice, no source: C4 is key 60, A4 key 69, as design has it.
	for text, want := range map[string]int{
		"C-1": 0, "C4": 60, "A4": 69, "G9": 127, "C2": 36, "B3": 59, "A0": 21, "C8": 108,
		"F#3": 54, "Gb3": 54, "Bb2": 46, "A#2": 46, "E#4": 65, "F4": 65, "Cb4": 59, "B#3": 60, "Fb4": 64,
		"C#-1": 1, "F♯3": 54, "B♭2": 46, "c4": 60, "bb2": 46, "b2": 47, "B#-2": 0,
		"0": 0, "36": 36, "059": 59, "127": 127, " A4 ": 69,
	} {
		if got, err := ParseKey(text); err != nil || got != want {
			t.Errorf("ParseKey(%q) = %d, %v; want %d", text, got, err, want)
		}
	}
	for _, text := range []string{
		"", " ", "C", "H4", "C-", "C--1", "-1", "128", "G#9", "C10", "Cb-1", "C##4", "4C", "C4C", "C 4", "A4-", "♯4", "C4.0", "+60",
	} {
		if got, err := ParseKey(text); err == nil {
			t.Errorf("ParseKey(%q) = %d; want an error", text, got)
		}
	}
}

func TestKeyNameRoundTrip(t *testing.T) {
	for key := 0; key <= lastKey; key++ {
		if got, err := ParseKey(KeyName(key)); err != nil || got != key {
			t.Errorf("key %d is named %s, which is read as %d, %v", key, KeyName(key), got, err)
		}
		low, high, err := parseKeys(KeysName(key, lastKey))
		if err != nil || low != key || high != lastKey {
			t.Errorf("%s is read as %d to %d, %v", KeysName(key, lastKey), low, high, err)
		}
	}
}

func TestParseKeys(t *testing.T) {
	for text, want := range map[string][2]int{
		"C2-B3": {36, 59}, "36-59": {36, 59}, "A4": {69, 69}, "60": {60, 60}, "C-1-G9": {0, 127},
		"36-B3": {36, 59}, "C2 - B3": {36, 59}, "Bb2-F#3": {46, 54}, "C-1-C-1": {0, 0},
	} {
		low, high, err := parseKeys(text)
		if err != nil || low != want[0] || high != want[1] {
			t.Errorf("parseKeys(%q) = %d, %d, %v; want %v", text, low, high, err, want)
		}
	}
}
