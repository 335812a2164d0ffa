package faults

import (
	"fmt"
	"math"
	"slices"

	"evenshelf/engine/audio"
)

// How much silence at the ends is worth a word: it leaves a hole in a playout. Common practice, no source.
const (
	longHead = 2.0 // seconds
	longTail = 3.0 // seconds
)

// nearSilence is the level in dBFS a recording has no sample above if it is hardly there: whispering taken
// carefully low still peaks 20 dB higher. Common practice, no source.
const nearSilence = -40.0

// silences finds recordings that are silent, nearly so, or empty, and long silence at their ends.
type silences struct {
	sounded     bool
	first, last int64 // first and last frame above the level of silence
}

func (s *silences) look(w window) {
	level := float32(audio.DB(silence).Linear())
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
	if peak := audio.ToDB(float64(slices.Max(e.peak))); peak < nearSilence {
		words := fmt.Sprintf("almost silent: nothing in it is above %s dBFS", audio.Number(math.Ceil(peak), 0))
		found = append(found, Fault{Code: "near-silent", Severity: Note, Length: whole, Words: words})
	}
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

// measure counts a recording that is silent throughout as silence before the first sound, which never came.
func (s *silences) measure(e extent, c *Condition) {
	c.HeadSilence, c.TailSilence = audio.Seconds(e.Seconds(e.frames)), 0
	if s.sounded {
		c.HeadSilence = audio.Seconds(e.Seconds(s.first))
		c.TailSilence = audio.Seconds(e.Seconds(e.frames - s.last - 1))
	}
}
