package faults

import (
	"fmt"

	"evenshelf/engine/audio"
)

// How much silence at the ends is worth a word: it leaves a hole in a playout. Common practice, no source.
const (
	longHead = 2.0 // seconds
	longTail = 3.0 // seconds
)

// silences finds recordings that are silent or empty, and long silence at their ends.
type silences struct {
	sounded     bool
	first, last int64 // first and last frame above the level of silence
}

func (s *silences) look(w window) {
	level := float32(linear(silence))
	for c, x := range w.Block {
		if w.peak[c] <= level {
			continue
		}
		loud := func(i int) bool { return x[i] > level || x[i] < -level }
		i := len(x) - 1
		for !loud(i) {
			i--
		}
		s.last = max(s.last, w.from+int64(i))
		if s.sounded && s.first < w.from {
			continue
		}
		for i = 0; !loud(i); i++ {
		}
		if at := w.from + int64(i); !s.sounded || at < s.first {
			s.first, s.sounded = at, true
		}
	}
}

func (s *silences) faults(e extent) []Fault {
	whole := e.Seconds(e.frames)
	switch {
	case e.frames == 0:
		return []Fault{{Code: "empty", Severity: Serious, Words: "there is no sound in it at all, not even silence"}}
	case !s.sounded:
		words := fmt.Sprintf("silent throughout: nothing in it is above −%.0f dBFS", -silence)
		return []Fault{{Code: "silent", Severity: Serious, Length: whole, Words: words}}
	}
	var found []Fault
	if head := e.Seconds(s.first); head >= longHead {
		words := fmt.Sprintf("%.1f s of silence before the first sound", head)
		found = append(found, Fault{Code: "head-silence", Severity: Note, Length: head, Words: words})
	}
	if at := e.Seconds(s.last + 1); whole-at >= longTail {
		words := fmt.Sprintf("%.1f s of silence after the last sound, from %s on", whole-at, audio.Clock(at))
		found = append(found, Fault{Code: "tail-silence", Severity: Note, At: at, Length: whole - at, Words: words})
	}
	return found
}
