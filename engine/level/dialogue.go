package level

import (
	"cmp"
	"slices"

	"evenshelf/engine/audio"
	"evenshelf/engine/meter"
	"evenshelf/engine/speech"
)

const (
	blockSteps  = 4   // of a 400 ms block of loudness
	offPhrase   = 6.0 // LU from the median phrase that do not count
	leastSpeech = 1.0 // seconds: less is a word between songs, and no anchor
	// A few seconds in minutes of music are more likely a mistake than speech.
	sparse      = 0.05 // of what is heard
	sparseLeast = 30.0 // seconds that are not few, whatever the share
)

// dialogue sums up the speech in a recording of a duration in seconds, which ends within its last step.
func dialogue(t Timeline, duration float64) Dialogue {
	d := speechIn(t.Course)
	if d.enough() {
		d.SpeechLoudness = speechLoudness(t.Course, t.Timeline)
	}
	d.ActiveTime = min(d.ActiveTime, audio.Seconds(duration))
	d.SpeechTime = min(d.SpeechTime, audio.Seconds(duration))
	return d
}

// speechIn says how long something is heard and how long it is speech; the loudness of that stays undefined.
func speechIn(c speech.Course) Dialogue {
	active, talk := 0, 0
	for i, on := range c.Active {
		if on {
			active++
		}
		if c.Speech[i] >= speech.Likely {
			talk++
		}
	}
	return Dialogue{
		ActiveTime:     audio.Seconds(active) / speech.StepsPerSecond,
		SpeechTime:     audio.Seconds(talk) / speech.StepsPerSecond,
		SpeechLoudness: audio.LUFS(audio.Undefined),
	}
}

// enough reports whether there is speech enough to go by.
func (d Dialogue) enough() bool {
	return d.SpeechTime >= leastSpeech && (d.SpeechTime >= sparse*d.ActiveTime || d.SpeechTime >= sparseLeast)
}

// speechLoudness is the integrated loudness, with both gates of BS.1770, of the 400 ms blocks of a timeline in which
// somebody speaks by a course, which may be that of another rendering of the recording. Phrases further than
// offPhrase from the median phrase are left out: they would be a few effects taken for speech, or a heckler, and
// being the loudest they would set the level. Undefined if there is none.
func speechLoudness(c speech.Course, t meter.Timeline) audio.LUFS {
	var phrases []phrase
	total := 0
	for _, p := range phrasesOf(c.Speech) {
		if l, n := t.Loudness(p.from, p.to); n > 0 {
			p.loudness = l
			phrases = append(phrases, p)
			total += n
		}
	}
	slices.SortFunc(phrases, func(a, b phrase) int { return cmp.Compare(a.loudness, b.loudness) })
	median, at := audio.LUFS(audio.Undefined), 0
	for _, p := range phrases {
		if at += p.to - p.from; 2*at >= total {
			median = p.loudness
			break
		}
	}
	speaks := make([]bool, len(t.Momentary))
	for _, p := range phrases {
		if abs(p.loudness-median) <= offPhrase {
			for i := p.from; i < min(p.to, len(speaks)); i++ {
				speaks[i] = true
			}
		}
	}
	return t.Integrated(func(block int) bool { return speaks[block] })
}

// phrase is a stretch of blocks of loudness, by the steps they end with, that somebody speaks in.
type phrase struct {
	from, to int
	loudness audio.LUFS
}

// phrasesOf returns the phrases of a likelihood of speech. One ends where no block reaches from one word to the next.
func phrasesOf(likely []float32) (phrases []phrase) {
	for i, p := range likely {
		if p < speech.Likely {
			continue
		}
		if n := len(phrases); n > 0 && i < phrases[n-1].to {
			phrases[n-1].to = i + blockSteps
		} else {
			phrases = append(phrases, phrase{from: i, to: i + blockSteps})
		}
	}
	return phrases
}
