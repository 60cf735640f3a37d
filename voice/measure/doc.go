// Package measure says what a rendered note is: the pitch and decay of its
// partials, its levels, its clicks, its loudness. It is for tests and plots; no
// sound passes through it.
//
// Signals are one channel, float32 or float64, 1 being full scale, at a rate in
// Hz. Levels in dB are relative to full scale: a mode's level is that of its
// peak, so a sine between -1 and +1 has 0 dB.
//
// What to choose:
//
//	pitch, T60 or level of one partial among others   Partial
//	two or three close modes (courses, polarizations) Modes
//	a whole picture, or the depth of a null           NewSpectrum, Level
//	a curve to plot                                   Decay, Spectrogram
//	what an ear makes of modes that beat              Track
//	a click in a bend                                 Click
//	how loud a piece is                               Loudness
//	a limit that must not be passed                   Peak, RMS, Mean
package measure

// Sample is what a signal is made of.
type Sample interface{ ~float32 | ~float64 }
