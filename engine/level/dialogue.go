package level

import (
	"evenshelf/engine/audio"
	"evenshelf/engine/speech"
)

const (
	isSpeech    = 0.5 // likelihood from which a step counts as speech
	speechSteps = 3   // of the four of a 400 ms block must be speech
	leastSpeech = 1.0 // seconds: less is a word between songs, and no anchor
)

// dialogue sums up the speech in a recording.
func dialogue(t Timeline) Dialogue {
	spoken := make([]int, len(t.Speech)+1) // steps of speech before each
	active := 0
	for i, likely := range t.Speech {
		spoken[i+1] = spoken[i]
		if likely >= isSpeech {
			spoken[i+1]++
		}
		if t.Active[i] {
			active++
		}
	}
	d := Dialogue{
		ActiveTime:     audio.Seconds(active) / speech.StepsPerSecond,
		SpeechTime:     audio.Seconds(spoken[len(t.Speech)]) / speech.StepsPerSecond,
		SpeechLoudness: audio.LUFS(audio.Undefined),
	}
	if d.SpeechTime >= leastSpeech {
		d.SpeechLoudness = t.Loudness(func(i int) bool { return spoken[i+1]-spoken[i-3] >= speechSteps })
	}
	return d
}
