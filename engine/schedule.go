package engine

// schedule holds the events that have a frame but are not due yet, the earliest first.
// Events of one frame keep the order in which they came, and no event goes
// ahead of an earlier one of its own channel, whatever their times: a NoteOff that is
// stamped too early still comes after its NoteOn.
type schedule struct {
	due   [scheduleLength]timed
	head  int
	count int
}

type timed struct {
	frame int64
	event Event
}

const scheduleLength = QueueLength

func (s *schedule) full() bool { return s.count == scheduleLength }

func (s *schedule) at(i int) *timed { return &s.due[(s.head+i)%scheduleLength] }

// add puts e in; there must be room. It returns the frame that e got.
func (s *schedule) add(frame int64, e Event) int64 {
	i := s.count
	for ; i > 0; i-- {
		before := s.at(i - 1)
		if before.frame <= frame {
			break
		}
		if before.event.Channel == e.Channel {
			frame = before.frame
			break
		}
		*s.at(i) = *before
	}
	*s.at(i) = timed{frame: frame, event: e}
	s.count++
	return frame
}

// first returns the earliest event's frame.
func (s *schedule) first() (frame int64, ok bool) {
	if s.count == 0 {
		return 0, false
	}
	return s.at(0).frame, true
}

// take removes the earliest event.
func (s *schedule) take() Event {
	e := s.at(0).event
	s.head = (s.head + 1) % scheduleLength
	s.count--
	return e
}
