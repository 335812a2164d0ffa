package faults

import (
	"fmt"

	"evenshelf/engine/audio"
)

// nonFinite counts samples that are infinite or not numbers at all. Floating-point files carry them when
// a broken effect or a damaged disk wrote them; a loudspeaker cannot play them.
type nonFinite struct {
	samples, frames, first, last int64
}

// mend counts the bad samples of w and puts silence in their place.
//
//go:norace
func (n *nonFinite) mend(w window) {
	last := int64(-1) // bad frame counted last
	for _, x := range w.Block {
		for i, v := range x {
			if finite(v) {
				continue
			}
			x[i] = 0
			at := w.from + int64(i)
			if n.samples == 0 || at < n.first {
				n.first = at
			}
			n.last = max(n.last, at)
			n.samples++
			if at > last { // a frame bad in a second channel is not counted again
				n.frames++
				last = at
			}
		}
	}
}

func (n *nonFinite) faults(e extent) []Fault {
	if n.samples == 0 {
		return nil
	}
	at := e.Seconds(n.first)
	words := fmt.Sprintf("%s samples are not numbers, first at %s; they were taken as silence", audio.Count(n.samples), audio.Clock(at))
	if n.samples == 1 {
		words = fmt.Sprintf("one sample, at %s, is not a number; it was taken as silence", audio.Clock(at))
	}
	return []Fault{{Code: "not-numbers", Severity: Serious, At: at, Length: e.Seconds(n.frames), Words: words}}
}
