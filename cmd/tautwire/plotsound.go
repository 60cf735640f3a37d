package main

import (
	"context"
	"math"
	"runtime"
	"slices"
	"sync"

	"tautwire/config"
	"tautwire/engine"
	"tautwire/voice/measure"
)

const (
	plotRate     = 48000 // Hz
	plotVelocity = 100
	plotStep     = 3 // keys of a zone from one that is played to the next
	plotLongest  = 20 * plotRate
	plotPart     = plotRate / 4 // frames rendered at once

	ringing = 60.0 // dB that a note falls in what is called its decay
	unheard = 70.0 // dB below its loudest, where a note is over
)

// keySound is one key of a patch: what the patch asks of it, and what it is as the engine
// sounds it, with level, courses, planes, sympathy and body. NaN is what could not be
// measured, for the key is silent, or over too soon.
type keySound struct {
	key    int
	values config.Values

	pitch       float64 // Hz asked for
	second      float64 // s asked for in the second plane; NaN without one of its own
	flat, sharp float64 // cents: the lowest and the highest of the key's strings, from pitch

	decay   float64   // s the fundamental takes to fall by 60 dB
	onset   float64   // cents from pitch just after the stroke, the body aside: what tension does
	settled []float64 // cents from pitch as it dies away, of each string that can be told apart

	stroke, later       measure.Spectrum // just after the stroke, and a second later
	bright, brightLater float64          // Hz: their centres
}

// keysToPlay are some keys of every zone, its lowest and its highest among them.
func keysToPlay(patch *config.Patch) []int {
	var keys []int
	for _, z := range patch.Zones {
		for key := z.Low; key < z.High; key += plotStep {
			keys = append(keys, key)
		}
		keys = append(keys, z.High)
	}
	return keys
}

// soundKeys plays keys of a patch, each alone, and measures them, in the order of the keys.
func soundKeys(ctx context.Context, s streams, patch *config.Patch) ([]keySound, error) {
	compiled, err := engine.Compile(patch, plotRate)
	if err != nil {
		return nil, err
	}
	bare, err := withoutBody(compiled, patch)
	if err != nil {
		return nil, err
	}
	keys := keysToPlay(patch)
	sounds := make([]keySound, len(keys))
	next, done := make(chan int, len(keys)), make(chan struct{}, len(keys))
	for i := range keys {
		next <- i
	}
	close(next)
	var workers sync.WaitGroup
	for range runtime.NumCPU() {
		workers.Go(func() {
			for i := range next {
				if ctx.Err() == nil {
					sounds[i] = soundKey(compiled, bare, patch, keys[i])
				}
				done <- struct{}{}
			}
		})
	}
	bar := newProgress(s.err, "playing "+patch.Title, float64(len(keys)))
	for range keys {
		<-done
		bar.add(1)
	}
	bar.done()
	workers.Wait()
	return sounds, ctx.Err()
}

// withoutBody is a patch whose strings sound alone, where tension bends them: what a body rings with in
// the first moments would hide that. It is the patch itself where nothing is to be hidden.
func withoutBody(compiled *engine.Compiled, patch *config.Patch) (*engine.Compiled, error) {
	tense := slices.ContainsFunc(patch.Zones, func(z config.Zone) bool { return z.Tension != config.Span{} })
	if !tense || patch.Body.Mix == 0 {
		return compiled, nil
	}
	bare := *patch
	bare.Body = config.Body{}
	return engine.Compile(&bare, plotRate)
}

func soundKey(compiled, bare *engine.Compiled, patch *config.Patch, key int) keySound {
	zone, _ := patch.Zone(key)
	k := keySound{key: key, values: zone.At(key), second: math.NaN()}
	k.pitch = measure.Shift(patch.Tuning.A4, 100*float64(key-69)+patch.Tuning.Cents[key%12])
	v := k.values
	if v.SecondMix > 0 && v.SecondDecay != 1 {
		k.second = v.Decay * v.SecondDecay
	}
	if v.Strings > 1 {
		k.flat, k.sharp = -v.CourseCents/2, v.CourseCents/2
	}
	switch {
	case v.SecondMix >= 1:
		k.flat, k.sharp = k.flat+v.SecondCents, k.sharp+v.SecondCents
	case v.SecondMix > 0:
		k.flat, k.sharp = min(k.flat, k.flat+v.SecondCents), max(k.sharp, k.sharp+v.SecondCents)
	}
	k.listen(playAlone(compiled, key, plotLongest))

	const (
		begin  = 0.03 // s: the blow itself is over
		moment = 0.3  // s
	)
	end := begin + max(moment, 10/k.pitch)
	k.onset = math.NaN()
	if track, err := measure.NewTrack(playAlone(bare, key, int(end*plotRate)), plotRate, k.pitch, k.pitch); err == nil {
		k.onset = measure.Cents(track.Pitch(begin, end), k.pitch)
	}
	return k
}

// playAlone strikes a key and holds it until it is no more heard, or a little longer than some frames; both sides
// are added.
func playAlone(compiled *engine.Compiled, key, frames int) []float32 {
	e := engine.New(compiled, engine.Options{Rate: plotRate, Timing: engine.Offline, Voices: 8})
	e.Send(engine.Event{Kind: engine.NoteOn, Key: uint8(key), Value: plotVelocity})
	out := make([]float32, 2*plotPart)
	var note []float32
	loudest := math.Inf(-1)
	for len(note) < frames {
		e.Render(out)
		for i := range plotPart {
			note = append(note, (out[2*i]+out[2*i+1])/2)
		}
		level := measure.RMS(out)
		loudest = max(loudest, level)
		if len(note) >= plotRate && level < loudest-unheard {
			break
		}
	}
	return note
}

// listen measures a note.
func (k *keySound) listen(note []float32) {
	k.decay = math.NaN()
	if track, err := measure.NewTrack(note, plotRate, k.pitch, k.pitch); err == nil {
		level := track.Level()
		k.decay = level.Fall(ringing)
		k.tellStrings(note, level)
	}
	window := int(max(0.3, 10/k.pitch) * plotRate) // tells the partials apart
	k.stroke = measure.NewSpectrum(note[:min(window, len(note))], plotRate)
	k.bright, k.brightLater = centre(k.stroke), math.NaN()
	if len(note) < plotRate+window {
		return
	}
	k.later = measure.NewSpectrum(note[plotRate:plotRate+window], plotRate)
	_, first := k.stroke.Peak(0, plotRate/2)
	if _, peak := k.later.Peak(0, plotRate/2); peak > first-unheard {
		k.brightLater = centre(k.later)
	}
}

// tellStrings finds as many of the key's strings and planes as can be told apart while the fundamental falls
// from 15 to 55 dB below its loudest, or in the last half. Their decay is free of the beats that
// the level has.
func (k *keySound) tellStrings(note []float32, level measure.Curve) {
	const sure = 0.05 // cents of standard deviation
	begin, end := len(note)/2, len(note)
	if fall := level.Fall(15) * plotRate; fall < float64(begin) {
		begin = int(fall)
	}
	if fall := level.Fall(55) * plotRate; fall < float64(end) {
		end = int(fall)
	}
	strings := max(1, k.values.Strings)
	if k.values.SecondMix > 0 && k.values.SecondMix < 1 {
		strings *= 2
	}
	for n := strings; n > 0; n-- {
		modes, err := measure.Modes(note[begin:end], plotRate, k.pitch, k.pitch, n)
		unsure := slices.ContainsFunc(modes, func(m measure.Mode) bool {
			return m.T60 <= 0 || measure.Cents(k.pitch+m.Sigma, k.pitch) > sure
		})
		if err != nil || unsure {
			continue
		}
		for _, m := range modes {
			k.settled = append(k.settled, measure.Cents(m.Frequency, k.pitch))
		}
		k.decay = fallOf(modes, float64(begin)/plotRate)
		return
	}
}

// fallOf is how long in s modes that were measured from a time on (s) take together to fall by 60 dB from the
// stroke.
func fallOf(modes []measure.Mode, since float64) float64 {
	power := func(t float64) float64 {
		var sum float64
		for _, m := range modes {
			sum += math.Pow(10, m.Level/10-ringing/10*(t-since)/m.T60)
		}
		return sum
	}
	floor := power(0) * math.Pow(10, -ringing/10)
	low, high := 0.0, 0.0 // s
	for _, m := range modes {
		high = max(high, m.T60) // none outlasts its own T60
	}
	for high-low > 1e-6*high {
		if mid := (low + high) / 2; power(mid) > floor {
			low = mid
		} else {
			high = mid
		}
	}
	return high
}

// centre is the mean frequency in Hz of what can be heard of a spectrum, weighted by amplitude; NaN for silence.
// It is what listeners call brightness: Grey and Gordon, "Perceptual Effects of Spectral Modifications on
// Musical Timbres", JASA 63(5), 1978.
func centre(s measure.Spectrum) float64 {
	const masked = 60.0 // dB below the strongest partial
	_, peak := s.Peak(0, plotRate/2)
	var all, weighted float64
	for i, level := range s.DB {
		if level > peak-masked {
			a := math.Pow(10, level/20)
			all += a
			weighted += a * float64(i) * s.Step
		}
	}
	return weighted / all
}
