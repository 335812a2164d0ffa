package level

import (
	"math"
	"math/rand/v2"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/meter"
	"evenshelf/engine/speech"
)

// Ten seconds at −40 LUFS, five of speech at −20, five at −10: only blocks count in which there is a step of
// speech. The means are worked out by hand.
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
	d := dialogue(course(100, 150), 20)
	if d.ActiveTime != 18 || d.SpeechTime != 5 {
		t.Errorf("%v s active, %v s speech, want 18 and 5", d.ActiveTime, d.SpeechTime)
	}
	// Blocks that end with steps 100 to 152 hold a step of speech: 50 at −20 LUFS and three at −10.
	want := 10 * math.Log10((50*0.01+3*0.1)/53)
	if got := float64(d.SpeechLoudness); math.Abs(got-want) > 1e-6 {
		t.Errorf("speech reads %.4f LUFS, want %.4f", got, want)
	}
	if d := dialogue(course(100, 109), 20); audio.Defined(d.SpeechLoudness) || d.SpeechTime != 0.9 {
		t.Errorf("a word is taken for an anchor: %+v", d)
	}
	// The same five seconds in an hour of music are no anchor, thirty are.
	hour := func(seconds int) Timeline {
		tl := course(0, 0)
		for i := range 36000 {
			tl.Momentary = append(tl.Momentary, -20)
			tl.Active = append(tl.Active, true)
			tl.Speech = append(tl.Speech, 0)
			if i < seconds*10 {
				tl.Speech[len(tl.Speech)-1] = 1
			}
		}
		return tl
	}
	if d := dialogue(hour(5), 3620); audio.Defined(d.SpeechLoudness) || d.SpeechTime != 5 {
		t.Errorf("five seconds in an hour: %+v", d)
	}
	if d := dialogue(hour(30), 3620); math.Abs(float64(d.SpeechLoudness)+20) > 1e-6 {
		t.Errorf("thirty seconds in an hour: %+v", d)
	}
	if d := dialogue(course(0, 200), 0.05); d.ActiveTime != 0.05 || d.SpeechTime != 0.05 {
		t.Errorf("more is heard than there is: %+v", d)
	}
	if d := dialogue(Timeline{}, 0); audio.Defined(d.SpeechLoudness) || d.ActiveTime != 0 {
		t.Errorf("nothing at all gives %+v", d)
	}
}

// Speech at −27 LUFS between shots at −13 that are taken for speech: the mean power would be that of the shots.
func TestSpeechLoudnessIsNotThatOfEffects(t *testing.T) {
	var tl meter.Timeline
	var c speech.Course
	add := func(steps int, lufs, likely float32) {
		for range steps {
			tl.Momentary, c.Speech = append(tl.Momentary, lufs), append(c.Speech, likely)
		}
	}
	for range 10 {
		add(50, -27, 0.9)
		add(10, -60, 0)
		add(15, -13, 0.7)
		add(10, -60, 0)
	}
	if got := speechLoudness(c, tl); math.Abs(float64(got)+27) > 0.3 {
		t.Errorf("speech at −27 LUFS reads %.2f", got)
	}
	if l := speechLoudness(speech.Course{}, tl); audio.Defined(l) {
		t.Errorf("no speech reads %.2f LUFS", l)
	}
}

// The curves of the meter and of speech lie on one grid, whatever the rate and the length.
func TestOneGrid(t *testing.T) {
	rng := rand.New(rand.NewPCG(11, 25))
	for _, rate := range []int{8000, 8001, 11025, 12345, 22050, 37800, 44056, 44100, 47999, 96001, 384000} {
		for steps := 1; steps < 30; steps++ {
			frames := int(math.Round(float64(steps*rate)/10)) + rng.IntN(5) - 2
			f, b := audio.Format{Rate: rate, Layout: audio.Mono}, audio.NewBlock(1, frames)
			m, err := meter.New(f, audio.OneChannel)
			if err != nil {
				t.Fatal(err)
			}
			talk := speech.New(f)
			m.Write(b)
			talk.Write(b)
			_, curves := m.Finish()
			if c := talk.Finish(); len(c.Speech) != len(curves.Peak) || len(c.Active) != len(curves.Peak) {
				t.Errorf("%d frames at %d Hz: %d steps of the meter, %d and %d of speech", frames, rate, len(curves.Peak), len(c.Active), len(c.Speech))
			}
		}
	}
}
