package engine

import (
	"math/rand/v2"
	"runtime"
	"sync"
	"testing"
)

func TestQueueKeepsOrder(t *testing.T) {
	q := NewQueue(64)
	next, want := 0, 0
	random := rand.New(rand.NewPCG(1, 1))
	for range 2000 {
		for range random.IntN(40) {
			if q.Push(Event{Kind: NoteOn, Time: int64(next)}) {
				next++
			}
		}
		for range random.IntN(40) {
			e, ok := q.Pop()
			if !ok {
				break
			}
			if e.Time != int64(want) {
				t.Fatalf("popped event %d, want %d", e.Time, want)
			}
			want++
		}
	}
	if want < 1000 {
		t.Fatalf("only %d events went through", want)
	}
}

func TestQueueKeepsRoomForReleases(t *testing.T) {
	releases := []Event{
		{Kind: NoteOff, Key: 60},
		{Kind: Control, Key: 64}, {Kind: Control, Key: 66, Value: 127}, {Kind: Control, Key: 67},
		{Kind: AllSoundOff}, {Kind: AllNotesOff}, {Kind: ResetControllers},
	}
	others := []Event{
		{Kind: NoteOn, Key: 60, Value: 1}, {Kind: Control, Key: 7}, {Kind: Bend}, {Kind: Program},
		{Kind: KeyPressure}, {Kind: ChannelPressure}, {Kind: Tune}, {Kind: Shift},
	}
	for _, e := range releases {
		q := NewQueue(16)
		for range 12 {
			q.Push(Event{Kind: NoteOn})
		}
		for _, other := range others {
			if q.Push(other) {
				t.Errorf("kind %d was taken when only the reserve was left", other.Kind)
			}
		}
		if got := q.Refused(); got != uint64(len(others)) {
			t.Errorf("%d events counted as refused, want %d", got, len(others))
		}
		for i := range 40 {
			if !q.Push(e) {
				t.Fatalf("release of kind %d was refused as number %d", e.Kind, i)
			}
			if i == 3 && q.Rescued() != 0 {
				t.Errorf("kind %d found no room in the reserve", e.Kind)
			}
		}
	}
}

// TestNoReleaseIsEverLost plays keys through a tiny queue that overflows all the time
// and follows which keys are down on both sides: when all has been popped no key may be down that
// the player has let go, and no release may come before the stroke that it ends.
func TestNoReleaseIsEverLost(t *testing.T) {
	rescued := uint64(0)
	for seed := range uint64(200) {
		random := rand.New(rand.NewPCG(seed, 3))
		q := NewQueue(8)
		var player, engine [16][128]bool
		var pedal, heard [16]float32
		pop := func(n int) {
			for range n {
				e, ok := q.Pop()
				if !ok {
					continue
				}
				switch e.Kind {
				case NoteOn:
					engine[e.Channel][e.Key] = true
				case NoteOff:
					engine[e.Channel][e.Key] = false
				case AllNotesOff:
					engine[e.Channel] = [128]bool{}
				case Control:
					heard[e.Channel] = e.Value
				}
			}
		}
		for range 400 {
			ch, key := uint8(random.IntN(2)), uint8(60+random.IntN(6))
			switch k := random.IntN(20); {
			case k < 8:
				if q.Push(Event{Kind: NoteOn, Channel: ch, Key: key, Value: 1}) {
					player[ch][key] = true
				}
			case k < 16:
				q.Push(Event{Kind: NoteOff, Channel: ch, Key: key})
				player[ch][key] = false
			case k < 17:
				q.Push(Event{Kind: AllNotesOff, Channel: ch})
				player[ch] = [128]bool{}
			default:
				pedal[ch] = float32(random.IntN(128))
				q.Push(Event{Kind: Control, Channel: ch, Key: controlDamper, Value: pedal[ch]})
			}
			pop(random.IntN(3))
		}
		pop(1000)
		if player != engine {
			t.Fatalf("seed %d: keys down differ after the queue ran empty", seed)
		}
		if pedal != heard {
			t.Fatalf("seed %d: pedals are %v, want %v", seed, heard, pedal)
		}
		rescued += q.Rescued()
	}
	if rescued < 1000 {
		t.Fatalf("only %d releases came to a full queue", rescued)
	}
}

// TestQueueUnderFire is the same with both sides at once, for the race detector.
func TestQueueUnderFire(t *testing.T) {
	const strokes = 100000
	q := NewQueue(16)
	var player, engine [128]bool
	var wait sync.WaitGroup
	wait.Add(1)
	go func() {
		defer wait.Done()
		random := rand.New(rand.NewPCG(5, 5))
		for range strokes {
			key := uint8(random.IntN(128))
			if random.IntN(2) == 0 {
				if q.Push(Event{Kind: NoteOn, Key: key, Value: 1}) {
					player[key] = true
				}
				continue
			}
			q.Push(Event{Kind: NoteOff, Key: key})
			player[key] = false
		}
		q.Push(Event{Kind: Program}) // may be refused
		for !q.Push(Event{Kind: Program, Value: 1}) {
			runtime.Gosched()
		}
	}()
	for end := false; !end; {
		e, ok := q.Pop()
		if !ok {
			runtime.Gosched()
			continue
		}
		switch e.Kind {
		case NoteOn:
			engine[e.Key] = true
		case NoteOff:
			engine[e.Key] = false
		case Program:
			end = e.Value == 1
		}
	}
	wait.Wait()
	if player != engine {
		t.Fatalf("keys down differ after the queue ran empty: %v and %v", player, engine)
	}
}

func TestScheduleNeverTurnsAChannelRound(t *testing.T) {
	s := new(schedule)
	s.add(100, Event{Kind: NoteOn, Channel: 1})
	s.add(90, Event{Kind: NoteOff, Channel: 1})
	s.add(95, Event{Kind: NoteOn, Channel: 2})
	s.add(100, Event{Kind: Bend, Channel: 2})
	var kinds []Kind
	last := int64(0)
	for s.count > 0 {
		frame, _ := s.first()
		if frame < last {
			t.Errorf("frame %d comes after %d", frame, last)
		}
		last = frame
		kinds = append(kinds, s.take().Kind)
	}
	want := []Kind{NoteOn, NoteOn, NoteOff, Bend}
	for i := range want {
		if kinds[i] != want[i] {
			t.Fatalf("order %v, want %v", kinds, want)
		}
	}
}
