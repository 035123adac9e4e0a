package datasets

import (
	"math"

	"ulpine/quant/elementary"
	"ulpine/quant/random"
)

// The recipe. All figures are invented, of the order a small centrifugal pump
// with a 3.57-defects-a-turn bearing might show; accelerations are in g, times in
// samples or seconds, frequencies in Hz.
const (
	pumpSamples = 128
	pumpRate    = 2560 // samples a second

	shaftLow, shaftHigh = 22, 30 // shaft frequency f, uniform
	loadLow, loadHigh   = 0.7, 1.3
	severitySpread      = 0.3  // severity v = exp(0.3 z)
	gainSpread          = 0.15 // gain g = exp(0.15 z)
	noise               = 0.12 // sigma, times U(0.7, 1.3)

	unbalance1    = 0.55 // added to a1, times v
	misalignment2 = 0.40 // added to a2, times v
	misalignment3 = 0.20 // added to a3, times v

	impactsPerTurn = 3.57 // of the bearing defect
	impactJitter   = 0.02 // of the spacing, times z
	impactLevel    = 0.9  // times v U(0.6, 1.4)
	ringDecay      = 0.0022
	ringLength     = 6 * ringDecay // cut off
	ringFrequency  = 780.0
	ringSpread     = 60.0 // times z

	bubbleRadius    = 0.8   // rho
	bubbleFrequency = 560.0 // theta = 2 pi (560 + 80 z)/rate
	bubbleSpread    = 80.0
	bubbleLevel     = 0.42 // times v e z
	burstChance     = 0.06 // a sample
	burstDecay      = 0.93 // a sample
	// bubbleLead samples run before the window begins, so that it opens inside a
	// stationary process: 0.93^128 < 10^-4.
	bubbleLead = 128

	// offsetRange: each window's offset is uniform within +-0.05 g, the order of
	// a sensor's zero-g offset (rule of thumb; the size is our own choice).
	offsetRange = 0.05

	remountedRing  = 330.0 // added to the ring frequency
	remountedGain  = 0.6   // times g
	remountedNoise = 1.3   // times sigma

	// The converter: 12 bits over +-8 g, so one step is 16/4096 = 2^-8 g.
	converterStep = 16.0 / 4096
	converterMax  = 2047
	converterMin  = -2048

	twoPi = 6.28318530717958647692528676655900577
)

// harmonics are the amplitudes at 1, 2, 3 times the shaft frequency at load 1.
var harmonics = [3]float64{0.25, 0.08, 0.04}

// pumpState is a class.
type pumpState int32

const (
	sound pumpState = iota
	unbalance
	misalignment
	bearing
	cavitation
)

// The random quantities of a window; each has draws of its own.
const (
	drawShaft uint32 = iota + 1
	drawLoad
	drawSeverity
	drawGain
	drawPhases
	drawNoiseLevel
	drawNoise
	drawOffset
	drawImpactStart
	drawImpactSpacing
	drawImpactLevel
	drawRing
	drawBubble
	drawBurst
	drawExcitation
)

// window is what is fixed for the length of one window.
type window struct {
	draws    random.Draws // of this window; Site is the quantity
	shaft    float64      // Hz
	severity float64
	ring     float64 // Hz
}

func (w *window) normal(quantity uint32, n uint64) float64 {
	d := w.draws
	d.Site = quantity
	return d.Normal(n)
}

// uniform returns number n of a quantity uniform in [low, high).
func (w *window) uniform(quantity uint32, n uint64, low, high float64) float64 {
	d := w.draws
	d.Site = quantity
	return low + float64((high-low)*d.Uniform(n))
}

// pumpWindow fills dst, pumpSamples long, with
//
//	x(t) = g [sum over i of a_i sin(2 pi i f t + phi_i) + q(t) + sigma z(t)] + offset
//
// as the converter reads it, in g. q is the state's own signal.
func pumpWindow(dst []float64, state pumpState, remounted bool, draws random.Draws) {
	w := &window{draws: draws}
	w.shaft = w.uniform(drawShaft, 0, shaftLow, shaftHigh)
	w.severity = elementary.Exp(float64(severitySpread * w.normal(drawSeverity, 0)))
	w.ring = ringFrequency + float64(ringSpread*w.normal(drawRing, 0))
	gain := elementary.Exp(float64(gainSpread * w.normal(drawGain, 0)))
	sigma := float64(noise * w.uniform(drawNoiseLevel, 0, 0.7, 1.3))
	if remounted {
		w.ring += remountedRing
		gain = float64(gain * remountedGain)
		sigma = float64(sigma * remountedNoise)
	}

	clear(dst)
	switch state {
	case bearing:
		w.addImpacts(dst)
	case cavitation:
		w.addBubbles(dst)
	}
	w.addHarmonics(dst, state)
	offset := w.uniform(drawOffset, 0, -offsetRange, offsetRange)
	for n := range dst {
		x := dst[n] + float64(sigma*w.normal(drawNoise, uint64(n)))
		dst[n] = convert(float64(gain*x) + offset)
	}
}

// addHarmonics adds the shaft's harmonics, raised by what the state adds.
func (w *window) addHarmonics(dst []float64, state pumpState) {
	load := w.uniform(drawLoad, 0, loadLow, loadHigh)
	var a [3]float64
	for i := range a {
		a[i] = float64(load * harmonics[i])
	}
	switch state {
	case unbalance:
		a[0] += float64(unbalance1 * w.severity)
	case misalignment:
		a[1] += float64(misalignment2 * w.severity)
		a[2] += float64(misalignment3 * w.severity)
	}
	for i := range a {
		phase := w.uniform(drawPhases, uint64(i), 0, twoPi)
		step := float64(twoPi*float64(float64(i+1)*w.shaft)) / pumpRate // radians a sample
		for n := range dst {
			dst[n] += float64(a[i] * elementary.Sin(float64(step*float64(n))+phase))
		}
	}
}

// addImpacts adds the ringing of a bearing defect: exp(-d/tau) sin(2 pi f0 d) at d
// seconds after each impact. The train of impacts starts up to two spacings before
// the window, earlier than any that still rings in it.
func (w *window) addImpacts(dst []float64) {
	spacing := 1 / float64(impactsPerTurn*w.shaft)
	at := float64(spacing * w.uniform(drawImpactStart, 0, -2, -1))
	turn := float64(twoPi * w.ring)
	for k := uint64(0); at < pumpSamples/float64(pumpRate); k++ {
		level := float64(float64(impactLevel*w.severity) * w.uniform(drawImpactLevel, k, 0.6, 1.4))
		first := max(-math.Floor(float64(-at*pumpRate)), 0) // the first sample at or after the impact
		for n := int(first); n < len(dst); n++ {
			d := float64(n)/pumpRate - at
			if d > ringLength {
				break
			}
			ring := float64(elementary.Exp(-d/ringDecay) * elementary.Sin(float64(turn*d)))
			dst[n] += float64(level * ring)
		}
		at += float64(spacing * (1 + float64(impactJitter*w.normal(drawImpactSpacing, k))))
	}
}

// addBubbles adds cavitation: noise in bursts through a resonance,
//
//	y[n] = 2 rho cos(theta) y[n-1] - rho^2 y[n-2] + 0.42 v e[n] z[n]
//
// where the envelope e falls by 0.93 a sample and is set to 1 with probability
// 0.06.
func (w *window) addBubbles(dst []float64) {
	frequency := bubbleFrequency + float64(bubbleSpread*w.normal(drawBubble, 0))
	theta := float64(twoPi*frequency) / pumpRate
	const diameter, feedback2 = 2 * bubbleRadius, bubbleRadius * bubbleRadius
	feedback1 := float64(diameter * elementary.Cos(theta))
	level := float64(bubbleLevel * w.severity)
	var y1, y2, envelope float64
	for n := -bubbleLead; n < len(dst); n++ {
		word := uint64(n + bubbleLead)
		envelope = float64(envelope * burstDecay)
		if w.uniform(drawBurst, word, 0, 1) < burstChance {
			envelope = 1
		}
		drive := float64(float64(level*envelope) * w.normal(drawExcitation, word))
		y := float64(feedback1*y1) - float64(feedback2*y2) + drive
		y1, y2 = y, y1
		if n >= 0 {
			dst[n] += y
		}
	}
}

// convert is the converter's reading of x, in g: the nearest step, half up, within
// its range.
func convert(x float64) float64 {
	code := math.Floor(float64(x/converterStep) + 0.5)
	return float64(min(max(code, converterMin), converterMax) * converterStep)
}
