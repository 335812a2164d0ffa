package level

import (
	"evenshelf/engine/audio"
	"evenshelf/engine/speech"
)

const (
	speechSteps = 3   // of the four of a 400 ms block must be speech
	leastSpeech = 1.0 // seconds: less is a word between songs, and no anchor
	// A few seconds in minutes of music are more likely a mistake than speech.
	sparse      = 0.05 // of what is heard
	sparseLeast = 30.0 // seconds that are not few, whatever the share
)

// dialogue sums up the speech in a recording of a duration in seconds, which ends within its last step.
func dialogue(t Timeline, duration float64) Dialogue {
	spoken := make([]int, len(t.Speech)+1) // steps of speech before each
	active := 0
	for i, likely := range t.Speech {
		spoken[i+1] = spoken[i]
		if likely >= speech.Likely {
			spoken[i+1]++
		}
		if t.Active[i] {
			active++
		}
	}
	d := Dialogue{
		ActiveTime:     min(audio.Seconds(active)/speech.StepsPerSecond, audio.Seconds(duration)),
		SpeechTime:     min(audio.Seconds(spoken[len(t.Speech)])/speech.StepsPerSecond, audio.Seconds(duration)),
		SpeechLoudness: audio.LUFS(audio.Undefined),
	}
	if d.SpeechTime >= leastSpeech && (d.SpeechTime >= sparse*d.ActiveTime || d.SpeechTime >= sparseLeast) {
		d.SpeechLoudness = t.Loudness(func(i int) bool { return spoken[i+1]-spoken[i-3] >= speechSteps })
	}
	return d
}
