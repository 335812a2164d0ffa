package meter

import "math"

// recall is the last seconds of one channel, kept so that the true peak of a passage can be found when it
// turns out to matter. It is a ring, with a lead before it and one after it that repeat its other end, so
// that what surrounds a sample is always in one piece.
type recall struct {
	n    int       // length of the ring, a multiple of chunk
	x    []float32 // frame f is x[lead + f mod n]
	peak []float64 // of each stretch of x, as in lane
	bend []float64
}

// newRecall returns a recall of at least a number of frames.
func newRecall(frames int) recall {
	n := (frames + chunk - 1) / chunk * chunk
	size := lead + n + lead
	return recall{n, make([]float32, size), make([]float64, size/stretch), make([]float64, size/stretch)}
}

// keep takes the chunk a lane has loaded, which starts at a frame that is a multiple of chunk.
func (r *recall) keep(l *lane, frame int64) {
	at := lead + int(frame%int64(r.n))
	copy(r.x[at:], l.raw)
	copy(r.peak[at/stretch:], l.peak[lead/stretch:])
	copy(r.bend[at/stretch:], l.bend[lead/stretch:])
	switch at {
	case lead:
		r.repeat(lead+r.n, lead)
	case lead + r.n - chunk:
		r.repeat(0, r.n)
	}
}

// repeat copies a lead from one place to another.
func (r *recall) repeat(to, from int) {
	copy(r.x[to:], r.x[from:][:lead])
	copy(r.peak[to/stretch:], r.peak[from/stretch:][:lead/stretch])
	copy(r.bend[to/stretch:], r.bend[from/stretch:][:lead/stretch])
}

// reset makes the past silence, as far as a search from the first chunk looks back.
func (r *recall) reset() {
	clear(r.x[:lead])
	clear(r.peak[:lead/stretch])
	clear(r.bend[:lead/stretch])
}

// largest returns the largest magnitude in frames [from, to).
//
//go:norace
func (r *recall) largest(from, to int64) (peak float64) {
	for from < to {
		at := lead + int(from%int64(r.n))
		if at%stretch == 0 && from+stretch <= to {
			peak = max(peak, r.peak[at/stretch])
			from += stretch
			continue
		}
		peak = max(peak, math.Abs(float64(r.x[at])))
		from++
	}
	return peak
}

// A hasty search looks only in the middle beside samples of at least this part of the best so far, and only
// where more than this factor could be gained.
const (
	hastyPart = 0.8
	hastyGain = 1.023293 // 0.2 dB
)

// truePeak returns the larger of best and the true peak of the intervals that start in frames [from, to),
// and the larger of most and a bound of that true peak. If it is hasty, the peak may be less than that.
//
//go:norace
func (r *recall) truePeak(k *kernel, from, to int64, best, most float64, hasty bool) (peak, bound float64) {
	gain := 1.0
	if hasty {
		gain = hastyGain
	}
	for from < to {
		at := lead + int(from%int64(r.n)) // a negative frame lies in the lead
		s := at / stretch
		end := (s + 1) * stretch
		last := min(end, at+int(to-from))
		from += int64(last - at)
		bend := max(r.bend[s-1], r.bend[s], r.bend[s+1])
		slack := k.slack[0] * bend
		top := max(r.peak[s], math.Abs(float64(r.x[end])))
		if hasty {
			most = max(most, top+slack)
			slack = min(slack, (1-hastyPart)*best)
		}
		if top+slack <= best*gain {
			most = max(most, top+slack)
			continue
		}
		around := k.far * max(r.peak[s-1], r.peak[s], r.peak[s+1])
		x := math.Abs(float64(r.x[at]))
		for ; at < last; at++ {
			y := math.Abs(float64(r.x[at+1]))
			top := max(x, y)
			x = y
			if top+slack <= best*gain {
				continue
			}
			best = max(best, top)
			if half := k.slack[1] * bend; !hasty && slack > around && top+half <= best {
				if k.near((*[nearTaps]float32)(r.x[at-(nearTaps/2-1):]))+around+half <= best {
					continue
				}
			}
			var w [taps]float64
			for i, v := range (*[taps]float32)(r.x[at-(reach-1):]) {
				w[i] = float64(v)
			}
			if hasty {
				best = max(best, k.at(phases/2, &w))
			} else {
				best = k.search(&w, bend, best)
			}
		}
		if !hasty {
			most = max(most, best)
		}
	}
	return best, most
}
