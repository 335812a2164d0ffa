package speech

import "evenshelf/engine/audio"

// weights says how much of each channel goes into the downmix. The voice is in the centre where there is
// one. Pairs go in unevenly: a sound that is in both with opposite polarity does not vanish, and a voice in the
// middle of both still stands out from the rest almost as in an even sum (it loses 0.3 dB).
func weights(l audio.Layout) []float64 {
	const uneven, besideCentre, bass = 0.6, 0.4, 0.2
	w, centre := make([]float64, l.Channels), -1
	side := 1.0
	for c := range w {
		switch l.Position(c) {
		case audio.LowFrequency:
			w[c] = bass
		case audio.FrontCentre:
			centre = c
		default:
			w[c] = side
			side = 1 + uneven - side
		}
	}
	if centre >= 0 {
		for c := range w {
			w[c] *= besideCentre
		}
		w[centre] = 1
	}
	return w
}

// mix writes frames at … at+len(dst) of b as one channel into dst. Samples that are not finite count as silence.
func mix(dst []float64, b audio.Block, at int, weights []float64) {
	if len(b) == 2 {
		pair(dst, b[0][at:at+len(dst)], b[1][at:at+len(dst)], weights[0], weights[1])
	} else {
		clear(dst)
		for c, w := range weights {
			put(dst, b[c][at:at+len(dst)], w)
		}
	}
	if finite(dst) {
		return
	}
	clear(dst)
	for c, w := range weights {
		for i, v := range b[c][at : at+len(dst)] {
			if v-v == 0 {
				dst[i] += w * float64(v)
			}
		}
	}
}

// put adds a channel.
//
//go:norace
func put(dst []float64, x []float32, weight float64) {
	x = x[:len(dst)]
	for i, v := range x {
		dst[i] += weight * float64(v)
	}
}

// pair writes the mix of two channels, the usual case.
//
//go:norace
func pair(dst []float64, x, y []float32, wx, wy float64) {
	x, y = x[:len(dst)], y[:len(dst)]
	for i := range dst {
		dst[i] = wx*float64(x[i]) + wy*float64(y[i])
	}
}

// finite reports whether all of x are finite numbers.
//
//go:norace
func finite(x []float64) bool {
	var a, b, c, d float64 // stay 0 as long as they are
	for ; len(x) >= 4; x = x[4:] {
		a, b, c, d = a+0*x[0], b+0*x[1], c+0*x[2], d+0*x[3]
	}
	for _, v := range x {
		a += 0 * v
	}
	return a+b+c+d == 0
}
