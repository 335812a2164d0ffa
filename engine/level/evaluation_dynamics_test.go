package level_test

import (
	"fmt"
	"math"
	"os"
	"testing"

	"evenshelf/engine/profile"
)

// tones measures what limiters and compressors do to a tone, delivered as 32-bit float (AES17).
func (b bench) tones(t *testing.T) {
	for _, hz := range []float64{997, 60} {
		for _, name := range []string{"talk", "rotation", "concert"} { // each has another limiter
			p := programme{name: fmt.Sprintf("%v Hz", hz), sound: sine(hz, 12, -1)}
			source := b.written(t, p)
			with := named(t, name)
			with.Ride.Speed, with.Compressor.Ratio, with.Anchor = profile.Still, 1, profile.Programme
			with.Target, with.Ceiling, with.Limiter.Most = -3, -6.5, 12
			r := b.level(t, p, source, with)
			to := limiterTone
			if hz == 60 {
				to = map[bool]*row{true: lowToneShown, false: lowTone}[name == "talk"]
			}
			b.note(to, r.on(), distortion(r.out[0][4*rate:8*rate], hz))
			r.done()
			os.Remove(source)
		}
		for _, name := range []string{"talk", "film", "transmitter"} { // each has another compressor
			p := bursts(hz, -32, -18)
			p.name = fmt.Sprintf("%v Hz", hz)
			source := b.written(t, p)
			with := named(t, name)
			with.Ride.Speed, with.Anchor = profile.Still, profile.Programme
			r := b.level(t, p, source, with)
			loud := p.turns[1]
			rest := distortion(r.out[0][int(loud.from+2)*rate:int(loud.from+5)*rate], hz)
			on := fmt.Sprintf("%s, %.1f dB taken off", r.on(), -mean(within(r.gain(), loud.from+2, loud.from+5))+mean(within(r.gain(), 10, 30)))
			b.note(map[bool]*row{true: compressorTone, false: lowToneShown}[hz == 997], on, rest)
			r.done()
			os.Remove(source)
		}
	}
}

// recovery measures how fast compressors take a loud tone down and let go of it.
func (b bench) recovery(t *testing.T) {
	p := programme{name: "tone, loud, tone", sound: joined(sine(997, 80, -32), sine(997, 5, -18), sine(997, 10, -32))}
	source := b.written(t, p)
	defer os.Remove(source)
	for _, name := range []string{"talk", "film", "transmitter"} {
		with := named(t, name)
		with.Ride.Speed, with.Anchor = profile.Still, profile.Programme
		r := b.level(t, p, source, with)
		gain := r.gain()
		high, low := median(within(gain, 20, 75)), median(within(gain, 82, 84))
		if high-low < 1 {
			t.Errorf("%s: the compressor takes off %.1f dB only: the test proves nothing", name, high-low)
		}
		near, far := high-0.1*(high-low), low+0.1*(high-low)
		fall := crossing(gain, 79, true, far) - crossing(gain, 79, true, near)
		rise := crossing(gain, 84, false, near) - crossing(gain, 84, false, far)
		b.note(downUp, r.on(), fall/rise)
		r.done()
	}
}

// crossing is when, after a time in s, a gain first lies below a level, or above it.
func crossing(gain []float64, from float64, below bool, level float64) float64 {
	for i := int(from * gainSteps); i < len(gain); i++ {
		if below == (gain[i] < level) {
			return float64(i) / gainSteps
		}
	}
	return math.NaN()
}
