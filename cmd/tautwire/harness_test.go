package main

import (
	"bufio"
	"bytes"
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"
)

// TestMain builds the programs under test: ours, and the bare JACK client that
// is its control.
func TestMain(m *testing.M) {
	folder, err := os.MkdirTemp("", "tautwire-test-")
	if err == nil {
		err = errors.Join(
			build("go", "build", "-o", filepath.Join(folder, "tautwire"), "."),
			build("gcc", "-O2", "-Wall", "-o", filepath.Join(folder, "jackprobe"), "testdata/jackprobe.c", "-ljack"),
			os.Setenv(toolsFolder, folder))
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	code := m.Run()
	os.RemoveAll(folder)
	os.Exit(code)
}

func build(line ...string) error {
	if out, err := exec.Command(line[0], line[1:]...).CombinedOutput(); err != nil {
		return fmt.Errorf("%s: %w\n%s", strings.Join(line, " "), err, out)
	}
	return nil
}

// toolsFolder is the environment's name for the folder of the programs.
const toolsFolder = "TAUTWIRE_TEST_TOOLS"

func tautwire() string  { return filepath.Join(os.Getenv(toolsFolder), "tautwire") }
func jackprobe() string { return filepath.Join(os.Getenv(toolsFolder), "jackprobe") }

// text is what a program has written so far.
type text struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (x *text) Write(p []byte) (int, error) {
	x.mu.Lock()
	defer x.mu.Unlock()
	return x.b.Write(p)
}

func (x *text) String() string {
	x.mu.Lock()
	defer x.mu.Unlock()
	return x.b.String()
}

// process is a program that a test started and that ends with the test.
type process struct {
	name     string
	cmd      *exec.Cmd
	stdin    io.WriteCloser
	out, err text
	ended    chan struct{} // closed once waitErr stands
	waitErr  error
}

// start runs a program with env added to the test's own environment.
func start(t testing.TB, env []string, name string, args ...string) *process {
	t.Helper()
	p := &process{name: filepath.Base(name), cmd: exec.Command(name, args...), ended: make(chan struct{})}
	p.cmd.Env = append(os.Environ(), env...)
	p.cmd.Stdout, p.cmd.Stderr = &p.out, &p.err
	p.cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true, Pdeathsig: syscall.SIGKILL}
	var err error
	if p.stdin, err = p.cmd.StdinPipe(); err != nil {
		t.Fatal(err)
	}
	if err := p.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	go func() {
		p.waitErr = p.cmd.Wait()
		close(p.ended)
	}()
	t.Cleanup(func() {
		p.signal(syscall.SIGTERM)
		if !p.endsWithin(3 * time.Second) {
			p.signal(syscall.SIGKILL)
			<-p.ended
		}
		if t.Failed() {
			t.Logf("%s wrote:\n%s%s", p.name, tail(p.out.String()), tail(p.err.String()))
		}
	})
	return p
}

// tail is the end of what was written, and the beginning: there a crash says what it is.
func tail(s string) string {
	const first, last = 1500, 4000
	if len(s) > first+last {
		return s[:first] + "\n...\n" + s[len(s)-last:]
	}
	return s
}

func (p *process) signal(s syscall.Signal) {
	select {
	case <-p.ended:
	default:
		p.cmd.Process.Signal(s)
	}
}

func (p *process) endsWithin(d time.Duration) bool {
	select {
	case <-p.ended:
		return true
	case <-time.After(d):
		return false
	}
}

// stops sends SIGTERM, upon which the daemon ends well within a second.
func (p *process) stops(t testing.TB) {
	t.Helper()
	begin := time.Now()
	p.signal(syscall.SIGTERM)
	if !p.endsWithin(10 * time.Second) {
		t.Fatal("SIGTERM does not end it")
	}
	if took, code := time.Since(begin), p.exitCode(); took > time.Second || code != 0 {
		t.Errorf("SIGTERM ended it after %v, with exit code %d", took, code)
	}
}

func (p *process) exitCode() int {
	<-p.ended
	return p.cmd.ProcessState.ExitCode()
}

// says waits until the program has written a text to either stream.
func (p *process) says(t testing.TB, what string, within time.Duration) {
	t.Helper()
	waitFor(t, within, fmt.Sprintf("%s to say %q", p.name, what), func() bool {
		return strings.Contains(p.out.String()+p.err.String(), what)
	}, p)
}

// waitFor waits for a condition and fails the test at the deadline, or when a
// program that it depends on has ended.
func waitFor(t testing.TB, within time.Duration, what string, done func() bool, on ...*process) {
	t.Helper()
	deadline := time.Now().Add(within)
	for !done() {
		for _, p := range on {
			select {
			case <-p.ended:
				if !done() {
					t.Fatalf("waiting for %s: %s has ended: %v\n%s%s", what, p.name, p.waitErr, tail(p.out.String()), tail(p.err.String()))
				}
			default:
			}
		}
		if time.Now().After(deadline) {
			t.Fatalf("waited %s in vain for %s", within, what)
		}
		time.Sleep(5 * time.Millisecond)
	}
}

// keyboard is a FIFO that MIDI bytes are written to.
type keyboard struct {
	path string
	file *os.File
}

// newKeyboard makes the FIFO; plug opens it once a reader listens.
func newKeyboard(t testing.TB) *keyboard {
	t.Helper()
	k := &keyboard{path: filepath.Join(t.TempDir(), "keyboard")}
	if err := syscall.Mkfifo(k.path, 0o600); err != nil {
		t.Fatal(err)
	}
	// Opened for reading too, so that the writer never waits for a reader, and
	// bytes that nobody has read yet are kept.
	f, err := os.OpenFile(k.path, os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	k.file = f
	t.Cleanup(func() { f.Close() })
	return k
}

func (k *keyboard) write(t testing.TB, bytes ...byte) {
	t.Helper()
	if _, err := k.file.Write(bytes); err != nil {
		t.Fatal(err)
	}
}

func (k *keyboard) on(t testing.TB, key, velocity byte) { t.Helper(); k.write(t, 0x90, key, velocity) }
func (k *keyboard) off(t testing.TB, key byte)          { t.Helper(); k.write(t, 0x80, key, 64) }

// records reads a log of ours.
func records(t testing.TB, path string) []map[string]any {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	var all []map[string]any
	lines := bufio.NewScanner(f)
	for lines.Scan() {
		var r map[string]any
		if err := json.Unmarshal(lines.Bytes(), &r); err != nil {
			t.Fatalf("%s: %v in %q", path, err, lines.Text())
		}
		for _, field := range []string{"time", "level", "event"} {
			if _, ok := r[field]; !ok {
				t.Errorf("%s: a record without %q: %s", path, field, lines.Text())
			}
		}
		all = append(all, r)
	}
	return all
}

// floats reads little-endian 32-bit floats.
func floats(t testing.TB, raw []byte) []float32 {
	t.Helper()
	x := make([]float32, len(raw)/4)
	if err := binary.Read(bytes.NewReader(raw), binary.LittleEndian, x); err != nil {
		t.Fatal(err)
	}
	return x
}

// wav is a WAV file of 32-bit floats.
type wav struct {
	rate, channels int
	samples        []float32 // interleaved
}

// errNoWAV is what parseWAV gives for what it doesn't read.
var errNoWAV = errors.New("no WAV file of 32-bit floats")

// parseWAV reads RIFF chunks on its own, not with the library that wrote them.
// A data chunk whose length is not filled in, as of a recorder that was
// stopped, goes to the end.
func parseWAV(raw []byte) (wav, error) {
	var w wav
	if len(raw) < 12 || string(raw[:4]) != "RIFF" || string(raw[8:12]) != "WAVE" {
		return w, errNoWAV
	}
	for at := 12; at+8 <= len(raw); {
		name, size := string(raw[at:at+4]), int(binary.LittleEndian.Uint32(raw[at+4:]))
		body := raw[at+8:]
		if size <= len(body) && !(name == "data" && size == 0) {
			body = body[:size]
		}
		switch name {
		case "fmt ":
			if len(body) < 16 {
				return w, errNoWAV
			}
			format := binary.LittleEndian.Uint16(body)
			if format == 0xfffe && len(body) >= 26 {
				format = binary.LittleEndian.Uint16(body[24:])
			}
			if bits := binary.LittleEndian.Uint16(body[14:]); format != 3 || bits != 32 {
				return w, fmt.Errorf("%w: format %d, %d bits", errNoWAV, format, bits)
			}
			w.channels = int(binary.LittleEndian.Uint16(body[2:]))
			w.rate = int(binary.LittleEndian.Uint32(body[4:]))
		case "data":
			for i := 0; i+4 <= len(body); i += 4 {
				w.samples = append(w.samples, math.Float32frombits(binary.LittleEndian.Uint32(body[i:])))
			}
			return w, nil
		}
		at += 8 + size + size%2
	}
	return w, errNoWAV
}

// mono adds the channels up.
func mono(interleaved []float32, channels int) []float64 {
	out := make([]float64, len(interleaved)/channels)
	for i := range out {
		for c := range channels {
			out[i] += float64(interleaved[i*channels+c])
		}
	}
	return out
}
