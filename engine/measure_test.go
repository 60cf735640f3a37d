package engine

import (
	"math/rand/v2"
	"slices"
	"sync"
	"testing"
)

func TestMeasuresKeepTheirOrder(t *testing.T) {
	for _, size := range []int{0, 1, 2, 3, 64} {
		r := NewMeasures(size)
		var m Measure
		if r.Take(&m) {
			t.Fatalf("size %d: took from an empty ring", size)
		}
		put, took := int64(0), int64(0)
		random := rand.New(rand.NewPCG(5, uint64(size)))
		for range 1000 {
			if random.IntN(2) == 0 {
				if r.Put(&Measure{Start: put}) {
					put++
				}
			} else if r.Take(&m) {
				if m.Start != took {
					t.Fatalf("size %d: took %d, want %d", size, m.Start, took)
				}
				took++
			}
		}
		if took == 0 {
			t.Errorf("size %d: nothing went through", size)
		}
	}
}

func TestMeasuresDropAndCountWhenFull(t *testing.T) {
	r := NewMeasures(4)
	for i := range int64(10) {
		if ok := r.Put(&Measure{Start: i}); ok != (i < 4) {
			t.Errorf("Put number %d = %v", i, ok)
		}
	}
	if r.Dropped() != 6 {
		t.Errorf("Dropped = %d, want 6", r.Dropped())
	}
	var m Measure
	for i := range int64(4) {
		if !r.Take(&m) || m.Start != i {
			t.Errorf("Take number %d gave %d", i, m.Start)
		}
	}
}

func TestMeasuresBetweenGoroutines(t *testing.T) {
	r := NewMeasures(16)
	const n = 20000
	var wait sync.WaitGroup
	wait.Go(func() {
		for i := int64(0); i < n; {
			if r.Put(&Measure{Start: i, Gap: -i}) {
				i++
			}
		}
	})
	var m Measure
	for i := int64(0); i < n; {
		if !r.Take(&m) {
			continue
		}
		if m.Start != i || m.Gap != -i {
			t.Fatalf("took %d and %d, want %d", m.Start, m.Gap, i)
		}
		i++
	}
	wait.Wait()
}

func TestMeasureKeepsTheFirstLatencies(t *testing.T) {
	var m Measure
	for i := range int64(12) {
		m.Note(i * 1000)
	}
	if m.Notes != 12 || len(m.Latencies()) != MeasuredNotes || m.Latencies()[7] != 7000 {
		t.Errorf("%d notes, latencies %v", m.Notes, m.Latencies())
	}
}

// The check is the nearest-rank quantile of the sorted times themselves.
func TestHistogramQuantiles(t *testing.T) {
	random := rand.New(rand.NewPCG(6, 7))
	tests := map[string]func(i int) int64{
		"even":     func(int) int64 { return random.Int64N(2_000_000) },
		"small":    func(i int) int64 { return int64(i % 40) },
		"skewed":   func(int) int64 { return int64(20e3 * (1 + random.ExpFloat64()*random.ExpFloat64())) },
		"constant": func(int) int64 { return 1_333_333 },
		"vast":     func(int) int64 { return random.Int64() },
	}
	for name, next := range tests {
		var h Histogram
		times := make([]int64, 5000)
		for i := range times {
			times[i] = next(i)
			h.Add(times[i])
		}
		slices.Sort(times)
		for _, q := range []float64{0, 0.01, 0.5, 0.9, 0.99, 0.999, 1} {
			rank := max(int(q*float64(len(times))+0.999999), 1)
			want := times[rank-1]
			got := h.Quantile(q)
			if got < want || float64(got) > float64(want)*(1+1.0/32)+1 {
				t.Errorf("%s: Quantile(%v) = %d, want %d or up to 1/32 more", name, q, got, want)
			}
		}
		if h.Max() != times[len(times)-1] || h.N() != 5000 {
			t.Errorf("%s: Max = %d, N = %d", name, h.Max(), h.N())
		}
	}
}

func TestHistogramBucketsJoin(t *testing.T) {
	var h Histogram
	if bucketOf(1<<63-1) != len(h.buckets)-1 {
		t.Errorf("the longest time is in bucket %d of %d", bucketOf(1<<63-1), len(h.buckets))
	}
	for i := range h.buckets {
		top := bucketTop(i)
		if bucketOf(top) != i {
			t.Fatalf("bucket %d: its top %d is in bucket %d", i, top, bucketOf(top))
		}
		if i+1 < len(h.buckets) && bucketOf(top+1) != i+1 {
			t.Fatalf("bucket %d: %d is in bucket %d", i, top+1, bucketOf(top+1))
		}
	}
}

func TestHistogramEmptyAndNegative(t *testing.T) {
	var h Histogram
	if h.Quantile(0.5) != 0 || h.Max() != 0 {
		t.Error("an empty histogram holds something")
	}
	h.Add(-5)
	if h.Quantile(1) != 0 || h.N() != 1 {
		t.Error("a negative time is not counted as 0")
	}
}

func TestWindow(t *testing.T) {
	var w Window
	if w.Load(48000) != 0 {
		t.Error("an empty window has load")
	}
	note := Measure{Frames: 48, Render: 250_000, Strings: 3, Events: 2, Cause: Late}
	note.Note(2_000_000)
	w.Add(&note)
	w.Add(&Measure{Frames: 48, Render: 750_000, Strings: 1, Cause: Slow})
	w.Add(&Measure{Frames: 48, Render: 9e9, Flags: Unheard, Cause: Slow})
	if w.Callbacks != 2 || w.Frames != 96 || w.Strings != 3 || w.Events != 2 || w.Notes != 1 || w.Missed() != 2 {
		t.Errorf("%d callbacks, %d frames, %d strings, %d events, %d notes, %d missed",
			w.Callbacks, w.Frames, w.Strings, w.Events, w.Notes, w.Missed())
	}
	if load := w.Load(48000); load != 0.5 {
		t.Errorf("Load = %v, want 0.5", load)
	}
	if w.Note.Max() != 2_000_000 {
		t.Errorf("Note.Max = %d", w.Note.Max())
	}
}
