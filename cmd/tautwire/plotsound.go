package main

import (
	"context"
	"math"
	"runtime"
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

	decay          float64 // s the fundamental takes to fall by 60 dB
	onset, settled float64 // cents from pitch: just after the stroke, and towards the end

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
					sounds[i] = soundKey(compiled, patch, keys[i])
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

func soundKey(compiled *engine.Compiled, patch *config.Patch, key int) keySound {
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
	k.listen(playAlone(compiled, key))
	return k
}

// playAlone strikes a key and holds it until it is no more heard, both sides added.
func playAlone(compiled *engine.Compiled, key int) []float32 {
	e := engine.New(compiled, engine.Options{Rate: plotRate, Timing: engine.Offline, Voices: 8})
	e.Send(engine.Event{Kind: engine.NoteOn, Key: uint8(key), Value: plotVelocity})
	out := make([]float32, 2*plotPart)
	var note []float32
	loudest := math.Inf(-1)
	for len(note) < plotLongest {
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
	k.listenToFundamental(note)

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

func (k *keySound) listenToFundamental(note []float32) {
	k.decay, k.onset, k.settled = math.NaN(), math.NaN(), math.NaN()
	track, err := measure.NewTrack(note, plotRate, k.pitch, k.pitch)
	if err != nil {
		return // beyond the rate
	}
	level := track.Level()
	k.decay = level.Fall(ringing)
	const (
		begin  = 0.03 // s: the blow itself is over
		moment = 0.3  // s
	)
	k.onset = measure.Cents(track.Pitch(begin, begin+max(moment, 10/k.pitch)), k.pitch)

	// Settled is what has fallen by 20 to 50 dB, or else the last quarter.
	end := float64(len(note)) / plotRate
	from := min(level.Fall(20), 0.75*end)
	k.settled = measure.Cents(track.Pitch(from, min(end, level.Fall(50))), k.pitch)
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
