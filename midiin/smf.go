package midiin

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"sort"
	"time"

	"gitlab.com/gomidi/midi/v2/smf"

	"tautwire/engine"
)

// What a performance may have at most. More is a damaged file, or not meant for us.
const (
	maxFileSize   = 16 << 20 // bytes
	maxFileEvents = 1 << 20
	maxFileTempos = 1 << 14
	maxDuration   = 24 * time.Hour
)

// Performance is a sequence of events with its own time.
type Performance struct {
	// Name is the file's, or the title of a built-in one.
	Name string
	// Events are in the order of their times, which count from the performance's start.
	Events []engine.Event
	// End is when the last track ends, from the start. All notes are released by then.
	End time.Duration
}

// ReadSMF reads a standard MIDI file of type 0 or 1.
//
// # Errors
//
// One line that names the file and the place, for a file that cannot be
// read, is cut off or damaged, is of type 2, or is beyond what an instrument plays: 16 MiB,
// a million events, 16384 changes of tempo, 24 hours.
func ReadSMF(path string) (*Performance, error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("performance %w", err)
	}
	defer file.Close()
	data, err := io.ReadAll(io.LimitReader(file, maxFileSize+1))
	if err != nil {
		return nil, fmt.Errorf("performance %w", err)
	}
	return ParseSMF(path, data)
}

// ParseSMF reads a standard MIDI file that is in memory; name stands in errors.
// Its errors are those of ReadSMF.
func ParseSMF(name string, data []byte) (*Performance, error) {
	p, err := parseSMF(data)
	if err != nil {
		return nil, fmt.Errorf("performance %s: %w", name, err)
	}
	p.Name = filepath.Base(name)
	return p, nil
}

func parseSMF(data []byte) (p *Performance, err error) {
	if len(data) > maxFileSize {
		return nil, fmt.Errorf("is larger than %d MiB: no performance needs that", maxFileSize>>20)
	}
	clean, clock, err := vet(data)
	if err != nil {
		return nil, err
	}
	defer func() {
		if r := recover(); r != nil {
			p, err = nil, fmt.Errorf("the reader gave up (%v): save it again as type 0 or 1", r)
		}
	}()
	file, err := smf.ReadFrom(bytes.NewReader(clean))
	if err != nil {
		return nil, fmt.Errorf("the reader gave up (%w): save it again as type 0 or 1", err)
	}
	packets, end := gather(file.Tracks)
	return clock.perform(packets, end)
}

// packet is a file's event at a tick.
type packet struct {
	tick  int64
	bytes []byte
	meta  bool
}

// gather merges the tracks, events of one tick in the order of tracks, and says at which
// tick the last of them ends. System Exclusive messages that the file has in several packets are joined.
func gather(tracks []smf.Track) (packets []packet, end int64) {
	for _, track := range tracks {
		tick, open := int64(0), -1
		for _, e := range track {
			tick += int64(e.Delta)
			b := e.Message.Bytes()
			switch {
			case b[0] == statusEndOfSysEx && open >= 0:
				packets[open].bytes = append(packets[open].bytes, b[1:]...)
			case b[0] == statusEndOfSysEx:
				packets = append(packets, packet{tick: tick, bytes: escaped(b[1:])})
			default:
				packets = append(packets, packet{tick, b, b[0] == statusMeta})
				open = -1
				if b[0] == statusSysEx {
					open = len(packets) - 1
				}
			}
			if open >= 0 && bytes.HasSuffix(packets[open].bytes, []byte{statusEndOfSysEx}) {
				open = -1
			}
		}
		end = max(end, tick)
	}
	sort.SliceStable(packets, func(i, j int) bool { return packets[i].tick < packets[j].tick })
	return packets, end
}

// escaped is what an escape, F7, brings: bytes as they are. Real-time bytes,
// which may be among them, mean nothing in a file.
func escaped(b []byte) (kept []byte) {
	for _, c := range b {
		if c < statusClock {
			kept = append(kept, c)
		}
	}
	return kept
}

// fileClock turns ticks into ns: a tick is num/den of them.
type fileClock struct {
	num, den int64
	metric   bool  // a tempo changes num
	tick     int64 // up to which sum counts
	sum      int64 // ns * den, so that nothing is rounded on the way
}

// defaultTempo is 120 quarter notes a minute, where a file says nothing.
const defaultTempo = 500000 // us a quarter note

// clockOf reads a file's division word: ticks to a quarter note, or SMPTE frames a
// second and ticks to a frame (Standard MIDI Files 1.0, header chunk).
func clockOf(division uint16) (fileClock, error) {
	if division&0x8000 == 0 {
		if division == 0 {
			return fileClock{}, errors.New("division is 0 ticks to a quarter note: save it again with 96 or more")
		}
		return fileClock{num: defaultTempo * 1000, den: int64(division), metric: true}, nil
	}
	frames, ticks := -int(int8(division>>8)), int64(division&0xFF)
	if ticks == 0 {
		return fileClock{}, errors.New("division is 0 ticks to a frame: save it again with 40 or more")
	}
	switch frames {
	case 24, 25, 30:
		return fileClock{num: int64(time.Second), den: int64(frames) * ticks}, nil
	case 29:
		// Drop-frame code names frames of 1001/30000 s.
		return fileClock{num: 1001 * int64(time.Second) / 10000, den: 3 * ticks}, nil
	}
	return fileClock{}, fmt.Errorf("division has %d frames a second: 24, 25, 29 and 30 are known", frames)
}

// at is the time of a tick, ns. Ticks must not go back.
func (c *fileClock) at(tick int64) (int64, error) {
	// Neither product nor sum can overflow: a delta is below 2^28 ticks and
	// maxDuration * den below 2^62, but many deltas may come between two packets.
	for c.tick < tick {
		step := min(tick-c.tick, 1<<28)
		c.sum += step * c.num
		c.tick += step
		if c.sum/c.den > int64(maxDuration) {
			return 0, fmt.Errorf("lasts longer than %d hours: its tempo or its division is damaged", maxDuration/time.Hour)
		}
	}
	return c.sum / c.den, nil
}

// perform plays the packets into a merger of its own, so that a file means what the same bytes
// mean live, and that no note is left hanging at its end.
func (c *fileClock) perform(packets []packet, end int64) (*Performance, error) {
	p := &Performance{}
	var now int64
	m := NewMerger(func(e engine.Event) bool {
		p.Events = append(p.Events, e)
		return true
	}, nil, func() int64 { return now })
	port := m.Open("")
	for _, packet := range packets {
		t, err := c.at(packet.tick)
		if err != nil {
			return nil, err
		}
		switch b := packet.bytes; {
		case !packet.meta:
			port.Write(b, t)
		case c.metric && isTempo(b):
			c.num = (int64(b[3])<<16 | int64(b[4])<<8 | int64(b[5])) * 1000
			if c.num == 0 {
				return nil, fmt.Errorf("has a tempo of 0 us to a quarter note at tick %d: it is damaged", packet.tick)
			}
		}
	}
	ns, err := c.at(end)
	if err != nil {
		return nil, err
	}
	now = ns
	port.Close()
	p.End = time.Duration(ns)
	sort.SliceStable(p.Events, func(i, j int) bool { return p.Events[i].Time < p.Events[j].Time })
	return p, nil
}

// Meta events.
const (
	statusMeta     = 0xFF
	metaEndOfTrack = 0x2F
	metaTempo      = 0x51
)

func isTempo(b []byte) bool { return len(b) == 6 && b[1] == metaTempo && b[2] == 3 }

// vet looks through a file before the reader allocates what its lengths ask for. It returns a copy that holds
// nothing but a header and whole tracks, its division a metric one, and the clock of the true
// division: the reader knows no SMPTE division.
func vet(data []byte) (clean []byte, clock fileClock, err error) {
	if len(data) >= 4 && string(data[:4]) == "RIFF" {
		return nil, clock, errors.New("is a RIFF file: save it as a standard MIDI file")
	}
	if len(data) < 14 || string(data[:4]) != "MThd" || binary.BigEndian.Uint32(data[4:]) < 6 {
		return nil, clock, errors.New("does not start with a whole MThd chunk: it is no standard MIDI file, or cut off")
	}
	format, tracks := binary.BigEndian.Uint16(data[8:]), int(binary.BigEndian.Uint16(data[10:]))
	if format > 1 {
		return nil, clock, fmt.Errorf("is of type %d: save it as type 0 or 1", format)
	}
	if clock, err = clockOf(binary.BigEndian.Uint16(data[12:])); err != nil {
		return nil, clock, err
	}
	clean = append(clean, data[:14]...)
	binary.BigEndian.PutUint32(clean[4:], 6)
	binary.BigEndian.PutUint16(clean[12:], 96)
	v := vetter{data: data}
	found := 0
	for v.at = 8 + int(binary.BigEndian.Uint32(data[4:])); found < tracks; {
		body, name, err := v.chunk()
		if err != nil {
			return nil, clock, fmt.Errorf("track %d of %d: %w", found+1, tracks, err)
		}
		if name != "MTrk" {
			continue
		}
		found++
		whole, err := v.track(body)
		if err != nil {
			return nil, clock, fmt.Errorf("track %d of %d: %w", found, tracks, err)
		}
		clean = append(clean, "MTrk"...)
		clean = binary.BigEndian.AppendUint32(clean, uint32(len(whole)))
		clean = append(clean, whole...)
	}
	if found == 0 {
		return nil, clock, errors.New("has no track")
	}
	return clean, clock, nil
}

// vetter goes through a file's bytes; at is where it stands.
type vetter struct {
	data   []byte
	at     int
	events int
	tempos int
}

// chunk passes over one chunk and returns its body.
func (v *vetter) chunk() (body []byte, name string, err error) {
	if v.at < 0 || len(v.data)-v.at < 8 {
		return nil, "", errors.New("is missing: the file is cut off")
	}
	name = string(v.data[v.at : v.at+4])
	length := int64(binary.BigEndian.Uint32(v.data[v.at+4:]))
	v.at += 8
	if left := int64(len(v.data) - v.at); length > left {
		return nil, "", fmt.Errorf("says %d bytes, and %d are left: the file is cut off", length, left)
	}
	body = v.data[v.at : v.at+int(length)]
	v.at += int(length)
	return body, name, nil
}

// track checks a track's events and returns its bytes up to its end.
func (v *vetter) track(body []byte) ([]byte, error) {
	t := trackVetter{body: body, base: v.at - len(body)}
	for {
		v.events++
		if v.events > maxFileEvents {
			return nil, fmt.Errorf("has more than %d events: no performance needs that", maxFileEvents)
		}
		end, err := t.event()
		if err != nil {
			return nil, err
		}
		if v.tempos+t.tempos > maxFileTempos {
			return nil, fmt.Errorf("has more than %d changes of tempo: no performance needs that", maxFileTempos)
		}
		if end {
			v.tempos += t.tempos
			return body[:t.at], nil
		}
	}
}

// trackVetter goes through one track.
type trackVetter struct {
	body    []byte
	at      int
	base    int // of the body in the file
	running byte
	tempos  int
}

func (t *trackVetter) event() (end bool, err error) {
	if t.at == len(t.body) {
		return false, t.fault("has no End of Track: the file is cut off")
	}
	if _, err := t.length(); err != nil {
		return false, err
	}
	if t.at == len(t.body) {
		return false, t.fault("ends inside an event")
	}
	b := t.body[t.at]
	switch {
	case b == statusMeta:
		t.at++
		t.running = 0
		if t.at == len(t.body) {
			return false, t.fault("ends inside an event")
		}
		kind := t.body[t.at]
		t.at++
		if kind == metaTempo {
			t.tempos++
		}
		return kind == metaEndOfTrack, t.skip()
	case b == statusSysEx, b == statusEndOfSysEx:
		t.at++
		t.running = 0
		return false, t.skip()
	case b > statusSysEx:
		return false, t.fault(fmt.Sprintf("has status %02X, which no file may have", b))
	case b >= 0x80:
		t.at++
		t.running = b
	case t.running == 0:
		return false, t.fault(fmt.Sprintf("has data byte %02X without a status", b))
	}
	for range messageLength(t.running) - 1 {
		if t.at == len(t.body) {
			return false, t.fault("ends inside an event")
		}
		if b := t.body[t.at]; b >= 0x80 {
			return false, t.fault(fmt.Sprintf("has status %02X inside a message", b))
		}
		t.at++
	}
	return false, nil
}

// skip passes over a length and as many bytes.
func (t *trackVetter) skip() error {
	n, err := t.length()
	if err != nil {
		return err
	}
	if n > len(t.body)-t.at {
		return t.fault(fmt.Sprintf("has an event of %d bytes where %d are left", n, len(t.body)-t.at))
	}
	t.at += n
	return nil
}

// length reads a variable-length quantity: four bytes at most.
func (t *trackVetter) length() (n int, err error) {
	for range 4 {
		if t.at == len(t.body) {
			return 0, t.fault("ends inside a number")
		}
		b := t.body[t.at]
		t.at++
		n = n<<7 | int(b&0x7F)
		if b < 0x80 {
			return n, nil
		}
	}
	return 0, t.fault("has a number of more than four bytes")
}

func (t *trackVetter) fault(what string) error {
	return fmt.Errorf("byte %d: %s", t.base+t.at, what)
}

// Play plays a performance live into port, at the merger's clock, until its end or the
// end of ctx, and closes the port, so that no note hangs. Events carry the time at which they
// were due, not that at which the player woke up. It returns nil at the end of the performance and
// ctx's error if that came first.
func Play(ctx context.Context, p *Performance, port *Port) error {
	defer port.Close()
	now := port.merger.now
	start := now()
	for _, e := range p.Events {
		e.Time += start
		if err := sleepUntil(ctx, e.Time, now); err != nil {
			return err
		}
		port.Event(e)
	}
	return sleepUntil(ctx, start+int64(p.End), now)
}

func sleepUntil(ctx context.Context, t int64, now func() int64) error {
	d := time.Duration(t - now())
	if d <= 0 {
		return ctx.Err()
	}
	timer := time.NewTimer(d)
	defer timer.Stop()
	select {
	case <-timer.C:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}
