package main

import (
	"bytes"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// logOf writes a log of a run: a start, a window every 10 s, a dropout an hour.
func logOf(w io.Writer, from time.Time, windows int) {
	stamp := func(at time.Time) string { return at.Format(logTime) }
	fmt.Fprintf(w, `{"level":"info","time":"%s","event":"start","version":"0.1.0","patch":"lamp-room","device":"null","host":"Null","rate":48000,"period":64}`+"\n", stamp(from))
	for i := range windows {
		at := from.Add(time.Duration(i+1) * 10 * time.Second)
		peak := 900 + float64(i)
		fmt.Fprintf(w, `{"level":"info","time":"%s","event":"window","callbacks":7500,"render_us":{"p50":100,"p99":200,"p999":300,"max":%g},"wake_us":{"p50":5,"p99":20,"p999":40,"max":50},"note_us":{"p50":1333.3,"p99":1340,"p999":1350,"max":1360},"load":0.25,"xruns":0,"strings":12,"events":30}`+"\n", stamp(at), peak)
		if i%360 == 359 {
			fmt.Fprintf(w, `{"level":"warn","time":"%s","event":"xrun","cause":"late","render_us":90,"gap_us":4000,"strings":12}`+"\n", stamp(at))
		}
	}
}

func TestReport(t *testing.T) {
	from := time.Date(2026, 3, 1, 20, 0, 0, 0, time.UTC)
	tests := []struct {
		name  string
		write func(w *bytes.Buffer)
		want  []string
		never []string
	}{
		{"a minute", func(w *bytes.Buffer) { logOf(w, from, 6) },
			[]string{"7 records", "version 0.1.0, patch lamp-room, on null", "45000 callbacks in 6 windows, 180 events, at most 12 strings",
				"mean 25.0 %", "905.0", "No dropouts."}, []string{"hour", "cut off", "no record"}},
		{"three hours", func(w *bytes.Buffer) { logOf(w, from, 3*360) },
			[]string{"3 dropouts", "late", "hour (UTC)", "2026-03-01 20:00", "2026-03-01 22:00"}, []string{"No dropouts"}},
		{"ten days", func(w *bytes.Buffer) { logOf(w, from, 10*24*360) },
			[]string{"240 dropouts, 1.00 an hour", "day (UTC)", "2026-03-01", "2026-03-11"}, []string{"hour (UTC)"}},
		{"cut off", func(w *bytes.Buffer) { logOf(w, from, 6); w.Truncate(w.Len() - 30) },
			[]string{"6 records", "the last line is cut off", "5 windows"}, []string{"no record"}},
		{"garbage between", func(w *bytes.Buffer) {
			logOf(w, from, 2)
			w.WriteString("segmentation fault\n\n{\"event\":3}\n\x00\xff\xfe\n{}\n[]\nnull\n{\"event\":\"window\"}\n")
			logOf(w, from.Add(time.Minute), 2)
		}, []string{"6 records", "7 lines that held no record"}, nil},
		{"an endless line", func(w *bytes.Buffer) {
			logOf(w, from, 2)
			w.WriteString(strings.Repeat("x", 3*lineMost) + "\n")
			logOf(w, from.Add(time.Minute), 2)
		}, []string{"6 records", "1 line that held no record"}, nil},
		{"only a start", func(w *bytes.Buffer) { logOf(w, from, 0) }, []string{"1 record ", "No window of measures", "No dropouts"}, nil},
		{"other records", func(w *bytes.Buffer) {
			logOf(w, from, 1)
			for range 3 {
				fmt.Fprintf(w, `{"level":"warn","time":"%s","event":"device","what":"lost"}`+"\n", from.Format(logTime))
			}
			fmt.Fprintf(w, `{"level":"info","time":"%s","event":"port","what":"plugged","port":"Net loft keys"}`+"\n", from.Format(logTime))
		}, []string{"device lost", "port plugged", "warn"}, nil},
	}
	for _, test := range tests {
		var log bytes.Buffer
		test.write(&log)
		path := filepath.Join(t.TempDir(), "log")
		if err := os.WriteFile(path, log.Bytes(), 0o644); err != nil {
			t.Fatal(err)
		}
		code, out, err := runHere(t, "report", path)
		if code != 0 || err != "" {
			t.Errorf("%s: exit code %d, %q", test.name, code, err)
		}
		for _, want := range test.want {
			if !strings.Contains(out, want) {
				t.Errorf("%s: lacks %q:\n%s", test.name, want, out)
			}
		}
		for _, never := range test.never {
			if strings.Contains(out, never) {
				t.Errorf("%s: has %q:\n%s", test.name, never, out)
			}
		}
	}
}

// TestReportStreams: the memory of a report doesn't grow with the log.
func TestReportStreams(t *testing.T) {
	var hour bytes.Buffer
	logOf(&hour, time.Date(2026, 3, 1, 20, 0, 0, 0, time.UTC), 360)
	const hours = 50
	var sum tally
	if err := sum.read(t.Context(), &repeat{text: hour.Bytes(), left: hours}, nil); err != nil {
		t.Fatal(err)
	}
	if sum.records != hours*362 {
		t.Errorf("%d records, want %d", sum.records, hours*362)
	}
	if held := len(sum.hours) + len(sum.starts) + len(sum.changes); held > 10 {
		t.Errorf("%d hours of the same log are held in %d pieces", hours, held)
	}
}

// repeat reads a text several times over.
type repeat struct {
	text []byte
	at   int
	left int
}

func (r *repeat) Read(p []byte) (int, error) {
	if r.left == 0 {
		return 0, io.EOF
	}
	n := copy(p, r.text[r.at:])
	if r.at += n; r.at == len(r.text) {
		r.at, r.left = 0, r.left-1
	}
	return n, nil
}
