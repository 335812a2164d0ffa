package level

import (
	"math"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/meter"
	"evenshelf/engine/speech"
)

// Ten seconds at −40 LUFS, five of speech at −20, five at −10: only blocks of speech count, and a block
// across the border counts if three of its four steps are speech. The means are worked out by hand.
func TestDialogue(t *testing.T) {
	course := func(speechFrom, speechTo int) Timeline {
		const steps = 200
		tl := Timeline{
			Timeline: meter.Timeline{Momentary: make([]float32, steps)},
			Course:   speech.Course{Active: make([]bool, steps), Speech: make([]float32, steps)},
		}
		for i := range steps {
			tl.Momentary[i] = -40
			if i >= 100 {
				tl.Momentary[i] = -20
			}
			if i >= 150 {
				tl.Momentary[i] = -10
			}
			tl.Active[i] = i >= 20
			if i >= speechFrom && i < speechTo {
				tl.Speech[i] = 0.9
			}
		}
		return tl
	}
	d := dialogue(course(100, 150))
	if d.ActiveTime != 18 || d.SpeechTime != 5 {
		t.Errorf("%v s active, %v s speech, want 18 and 5", d.ActiveTime, d.SpeechTime)
	}
	// Blocks that end with steps 102 to 150 hold three steps of speech: 48 at −20 LUFS and one at −10.
	want := 10 * math.Log10((48*0.01+1*0.1)/49)
	if got := float64(d.SpeechLoudness); math.Abs(got-want) > 1e-6 {
		t.Errorf("speech reads %.4f LUFS, want %.4f", got, want)
	}
	if d := dialogue(course(100, 109)); audio.Defined(d.SpeechLoudness) || d.SpeechTime != 0.9 {
		t.Errorf("a word is taken for an anchor: %+v", d)
	}
	if d := dialogue(Timeline{}); audio.Defined(d.SpeechLoudness) || d.ActiveTime != 0 {
		t.Errorf("nothing at all gives %+v", d)
	}
}
