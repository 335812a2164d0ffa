package ride

import "math"

// rangeMap says how a level is brought towards the anchor.
type rangeMap struct{ anchor, deadband, lift, cut float64 }

// gain for a level, of whose difference from the anchor past the deadband a share is kept. It keeps the order
// of levels, whatever the share.
func (m rangeMap) gain(level, kept float64) float64 {
	if past := math.Abs(level-m.anchor) - m.deadband; past > 0 {
		return clamp(math.Copysign(past, m.anchor-level)*(1-kept), -m.cut, m.lift)
	}
	return 0
}

// narrowing is what has to be known to find how much of the differences can stay.
type narrowing struct {
	*job
	to     rangeMap
	slow   []float64 // the slow level
	said   []float64 // share of speech around: of it no more is kept than has to be
	even   bool      // speech is evened whatever the range
	gain   []float64 // of the steps, at the last try
	curve  []float64 // what becomes of it
	ridden []float64 // powers with it
	ranger ranger
}

const (
	fine      = 0.005 // of the share
	asWide    = 0.5   // LU: what is wider by no more is as wide as asked for, and stays as it is
	rangeSlop = 0.1   // LU: a ride that leaves it wider by no more came to its range
)

// solve returns the greatest share of differences that can stay in what is not speech if the loudness range is to
// be most, or the least share if that is not enough.
func (w *narrowing) solve(most float64) float64 {
	if w.try(1) <= most+asWide {
		return 1
	}
	low, high := w.Keep, 1.0
	if w.try(low) > most {
		return low
	}
	for high-low > fine {
		if middle := (low + high) / 2; w.try(middle) > most {
			high = middle
		} else {
			low = middle
		}
	}
	w.try(low)
	return low
}

// try foresees the loudness range, but for fades, if a share of the differences stays.
func (w *narrowing) try(kept float64) float64 {
	for i, l := range w.slow {
		w.gain[i] = w.to.gain(l, w.share(i, kept))
	}
	w.shape(w.curve, w.gain)
	for i, p := range w.power {
		w.ridden[i] = p * power((w.curve[i]+w.curve[i+1])/2)
	}
	return w.ranger.of(w.ridden[w.body.From:w.body.To])
}

// share is what stays of the differences at a step.
func (w *narrowing) share(i int, kept float64) float64 {
	if !w.even {
		return kept
	}
	return kept + (w.Keep-kept)*w.said[i]
}
