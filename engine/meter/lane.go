package meter

import "math"

const (
	stretch = reach       // intervals judged by one bound
	lead    = 2 * stretch // samples kept in front: one stretch under the kernel's past, one not yet judged
)

// lane is the working memory of one channel. New samples are collected in raw; load puts them behind the
// lead as float64 and bounds them. Then every stretch but the first and the last can be searched, because
// a search needs the whole stretches before and after its own; the last waits in the lead for the next.
type lane struct {
	raw  []float32
	x    []float64
	peak []float64 // largest |x[i]| of each stretch
	bend []float64 // largest |x[i] − 2x[i−1] + x[i−2]| of each stretch
}

// newLane returns a lane that takes a number of new samples at once, a multiple of stretch.
func newLane(samples int) lane {
	n := lead + samples
	return lane{make([]float32, samples), make([]float64, n), make([]float64, n/stretch), make([]float64, n/stretch)}
}

// load moves the new samples in. What is not a finite number becomes silence; load returns how many
// that were. Magnitudes are compared as bit patterns without their sign, which order alike and need no
// branch.
//
//go:norace
func (l *lane) load() (bad int64) {
	const infinite = 0x7f800000 << 1 // and from there on, what is not a number
	for i := 0; i < len(l.raw); i += stretch {
		src := (*[stretch]float32)(l.raw[i:])
		dst := (*[stretch]float64)(l.x[lead+i:])
		y, z := l.x[lead+i-1], l.x[lead+i-2]
		var peak uint32
		var bend uint64
		for j, v := range src {
			a := math.Float32bits(v) << 1
			if a >= infinite {
				bad++
				v, a = 0, 0
				src[j] = 0
			}
			x := float64(v)
			dst[j] = x
			peak = max(peak, a)
			bend = max(bend, math.Float64bits((x-y)-(y-z))<<1)
			y, z = x, y
		}
		s := (lead + i) / stretch
		l.peak[s] = float64(math.Float32frombits(peak >> 1))
		l.bend[s] = math.Float64frombits(bend >> 1)
	}
	return bad
}

// advance makes the last samples the lead of those to come.
func (l *lane) advance() {
	copy(l.x, l.x[len(l.x)-lead:])
	copy(l.peak, l.peak[len(l.peak)-lead/stretch:])
	copy(l.bend, l.bend[len(l.bend)-lead/stretch:])
}

// reset makes the past silence.
func (l *lane) reset() {
	clear(l.x[:lead])
	clear(l.peak[:lead/stretch])
	clear(l.bend[:lead/stretch])
}

// sharpest bounds the second differences under the kernel anywhere in stretch s.
func (l *lane) sharpest(s int) float64 { return max(l.bend[s-1], l.bend[s], l.bend[s+1]) }

// window returns the samples under the kernel for the interval that starts at x[i].
func (l *lane) window(i int) *[taps]float64 { return (*[taps]float64)(l.x[i-(reach-1):]) }
