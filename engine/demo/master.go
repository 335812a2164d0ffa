package demo

import (
	"math"

	"evenshelf/engine/audio"
	"evenshelf/engine/meter"
)

// master brings sound to a loudness, in place, as the last stage of a production does: gain, then a
// curve that bends peaks over towards the top, the highest sample (dBFS) allowed. Far below the top the
// curve is straight, so a quiet or dynamic piece is only scaled; the louder the target, the more of its
// peaks are squeezed.
//
// The curve never becomes flat, and a high-pass below hearing tilts what it presses together, so a loud
// production has no flat tops and is not mistaken for a clipped one.
func master(b audio.Block, f audio.Format, target audio.LUFS, top audio.DBFS) {
	m, err := meter.New(f, audio.OneChannel)
	if err != nil {
		panic(err) // the shelf has no format that cannot be measured
	}
	missing := func(b audio.Block) float64 {
		m.Reset()
		m.Write(b)
		reading, _ := m.Finish()
		return float64(target - reading.Integrated)
	}
	out := audio.NewBlock(len(b), b.Frames())
	limit := gain(float64(top))
	bend, push := limit, missing(b)
	for range 12 {
		peak := squeeze(out, b, f.Rate, gain(push), bend)
		miss := missing(out)
		if math.Abs(miss) < 0.02 && peak <= limit {
			break
		}
		push += 1.3 * miss // the curve takes back part of what is added
		if peak > limit {  // the high-pass lets peaks overshoot a little
			bend *= 0.995 * limit / peak
		}
	}
	for c := range b {
		copy(b[c], out[c])
	}
}

// squeeze writes src, scaled, bent and high-passed, to dst and returns the highest sample of the result.
func squeeze(dst, src audio.Block, rate int, g, top float64) (peak float64) {
	knee := 0.55 * top
	for c := range src {
		hp := highpass(rate, 20, 0.707)
		for i, x := range src[c] {
			y := g * float64(x)
			if over := math.Abs(y) - knee; over > 0 {
				u := over / (top - knee)
				y = math.Copysign(knee+(top-knee)*u/(1+u), y)
			}
			y = hp.tick(y)
			peak = max(peak, math.Abs(y))
			dst[c][i] = float32(y)
		}
	}
	return peak
}
