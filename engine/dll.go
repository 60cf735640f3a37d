package engine

import "math"

// DLL filters the jitter out of the times at which callbacks start, so that
// a time can be told as a frame to a small part of the jitter.
//
// The method is the delay-locked loop of Adriaensen, "Using a DLL to filter
// time", Linux Audio Conference 2005: t0 and t1 are the filtered starts of this
// period and of the next, and a second-order loop with the coefficients
// b = sqrt(2) w and c = w*w, w = 2 pi B/F, pulls t1 towards the times seen (B is
// the bandwidth, F the rate of periods). The line from t0 to t1 joins that of the
// period before, so that time told as frames never steps backwards.
//
// Two things are added. The bandwidth starts wide and narrows as the paper's
// last section suggests. And a callback that is far off its time is a late
// wake-up, not a change of the clock: its error is limited to half a
// period, and only when the errors stay large does the loop lock anew.
//
// A DLL is not for use by several goroutines at once. Make one with NewDLL.
type DLL struct {
	nominal  float64 // ns per frame as the rate says
	perFrame float64 // ns per frame, filtered
	// The start of this period is origin + t0, of the next one origin + t1; the
	// origin follows so that nothing is lost to rounding in a run of months.
	origin  int64
	t0, t1  float64 // ns
	frames  float64 // of this period
	elapsed float64 // ns since the loop locked
	astray  int     // callbacks in a row that were far off to the same side, early ones negative
	since   int64   // ns: when the first of them came
	locked  bool
}

const (
	dllBandwidth = 1.0 // Hz, when settled
	// At the age of t seconds the bandwidth is dllHaste/t Hz, where that is more:
	// about three turns of the loop to settle in at each width.
	dllHaste = 3.0
	// The largest w: the loop is stable up to about 1, and rings little at 0.3.
	dllMaxOmega = 0.3
	// Errors of more than a period to the same side, in so many callbacks in a row
	// and for so long, mean that the device has lost or gained time. (Sound servers
	// call for many short periods at once, though for less than 0.1 s of them.)
	dllAstrayRuns = 8
	dllAstraySpan = 100e6 // ns
	// A single error above this is a pause, after which nothing holds any more.
	dllGap = 250e6 // ns
)

// NewDLL returns an unlocked loop for a stream of rate frames per second.
func NewDLL(rate float64) *DLL {
	return &DLL{nominal: 1e9 / rate}
}

// Update tells the loop that a period of that many frames was called for at now
// (ns). It returns how late the call was, in ns: negative if early, 0 at
// the first call and where the loop locked anew.
func (d *DLL) Update(now int64, frames int) (late int64) {
	if frames <= 0 {
		return 0
	}
	if !d.locked {
		d.lock(now, frames)
		return 0
	}
	e := float64(now-d.origin) - d.t1
	period := d.perFrame * float64(frames)
	if d.strayed(now, e, math.Max(period, d.perFrame*d.frames)) {
		d.lock(now, frames)
		return 0
	}
	late = int64(e)
	e = max(-period/2, min(period/2, e))

	w := d.omega(period)
	d.t0 = d.t1
	d.t1 += math.Sqrt2*w*e + period
	d.perFrame += w * w * e / float64(frames)
	d.frames = float64(frames)
	d.elapsed += period

	whole := math.Floor(d.t0)
	d.origin += int64(whole)
	d.t0 -= whole
	d.t1 -= whole
	return late
}

// Frame returns the frame of the time t (ns), counted from the start of the current
// period: 0 is its first frame; times before it are negative.
// Before the first Update it returns 0.
func (d *DLL) Frame(t int64) float64 {
	if !d.locked {
		return 0
	}
	return (float64(t-d.origin) - d.t0) * d.frames / (d.t1 - d.t0)
}

// Start returns the filtered start of the current period, in ns.
func (d *DLL) Start() int64 { return d.origin + int64(math.Round(d.t0)) }

// Rate returns the filtered rate, in frames per second of the monotonic clock.
func (d *DLL) Rate() float64 {
	if !d.locked {
		return 1e9 / d.nominal
	}
	return 1e9 / d.perFrame
}

// Unlock makes the next Update start anew, as after the stream has been reopened.
func (d *DLL) Unlock() { d.locked = false }

func (d *DLL) lock(now int64, frames int) {
	*d = DLL{
		nominal:  d.nominal,
		perFrame: d.nominal,
		origin:   now,
		t1:       d.nominal * float64(frames),
		frames:   float64(frames),
		locked:   true,
	}
}

func (d *DLL) strayed(now int64, e, period float64) bool {
	if math.Abs(e) > dllGap+period {
		return true
	}
	switch {
	case e > period:
		d.astray = max(d.astray, 0) + 1
	case e < -period:
		d.astray = min(d.astray, 0) - 1
	default:
		d.astray = 0
	}
	if d.astray == 1 || d.astray == -1 {
		d.since = now
	}
	return (d.astray >= dllAstrayRuns || d.astray <= -dllAstrayRuns) && now-d.since >= dllAstraySpan
}

func (d *DLL) omega(period float64) float64 {
	bandwidth := math.Max(dllBandwidth, dllHaste*1e9/(d.elapsed+period))
	return math.Min(2*math.Pi*bandwidth*period/1e9, dllMaxOmega)
}
