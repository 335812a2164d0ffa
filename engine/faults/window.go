package faults

import (
	"math"

	"evenshelf/engine/audio"
)

// window is a part of the recording, 100 ms, only the last may be shorter, with what several checks would
// otherwise have to find out for themselves.
type window struct {
	audio.Block             // must be neither kept nor changed; every sample is finite
	from        int64       // its first frame
	wide        audio.Block // pastFrames of the recording before it, silence before its start, and the window
	top, bottom []float32   // of each channel: the highest sample and minus the lowest one, both at least 0
	peak        []float32   // the larger one of the two
	tops        audio.Block // top of each channel in each part of the window
	bottoms     audio.Block // bottom likewise
	sums        []float64   // of the samples of each channel
	low         []float64   // the mixture of all channels brought down to about 1 kHz
	mended      bool        // silence has been put in place of samples of wide that were not finite
}

// parts is how many parts a window has; they are as even as can be.
const parts = 16

// part returns where part i of n frames begins.
func part(i, n int) int { return i * n / parts }

// survey finds the extremes of channel c and of its parts.
func (w window) survey(c int) {
	x := w.Block[c]
	w.top[c], w.bottom[c] = 0, 0
	for i := range parts {
		w.tops[c][i], w.bottoms[c][i] = extremes(x[part(i, len(x)):part(i+1, len(x))])
		w.top[c], w.bottom[c] = max(w.top[c], w.tops[c][i]), max(w.bottom[c], w.bottoms[c][i])
	}
	w.peak[c] = max(w.top[c], w.bottom[c])
}

// past is how many seconds before a window its wide form begins.
const past = 0.05

func pastFrames(rate int) int { return max(4, int(past*float64(rate))) }

// extremes returns the highest sample and minus the lowest one, 0 where there is none on that side of zero;
// what is not finite counts as the highest or lowest. It orders bit patterns, which for positive numbers
// ascend as signed integers and for negative ones as unsigned.
//
//go:norace
func extremes(x []float32) (top, bottom float32) {
	const sign = 1 << 31
	var hi, hi2 int32
	var lo, lo2 uint32 = sign, sign
	for ; len(x) >= 2; x = x[2:] { // in two lanes, which do not wait for each other
		a, b := math.Float32bits(x[0]), math.Float32bits(x[1])
		hi, hi2 = max(hi, int32(a)), max(hi2, int32(b))
		lo, lo2 = max(lo, a), max(lo2, b)
	}
	if len(x) == 1 {
		hi, lo = max(hi, int32(math.Float32bits(x[0]))), max(lo, math.Float32bits(x[0]))
	}
	return math.Float32frombits(uint32(max(hi, hi2))), math.Float32frombits(max(lo, lo2) &^ sign)
}

// finite reports whether v is a number below infinity.
func finite(v float32) bool {
	const exponent = 0x7f800000 // all ones: infinite or not a number
	return math.Float32bits(v)&exponent != exponent
}

// sum adds samples in four lanes, which do not wait for each other.
//
//go:norace
func sum(x []float32) float64 {
	var a, b, c, d float64
	for ; len(x) >= 4; x = x[4:] {
		a += float64(x[0])
		b += float64(x[1])
		c += float64(x[2])
		d += float64(x[3])
	}
	for _, v := range x {
		a += float64(v)
	}
	return (a + b) + (c + d)
}
