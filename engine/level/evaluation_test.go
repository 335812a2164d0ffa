// The evaluation: composed programmes of real recordings go through the whole engine, and what comes out is
// measured by means that are not the engine's. It prints what it found beside what is aimed at; missing the
// least of a figure fails it. 'make evaluation' also writes it into EVALUATION.md.
package level_test

import (
	"flag"
	"testing"
)

var update = flag.Bool("update", false, "write the result of the evaluation into EVALUATION.md")

func TestEvaluation(t *testing.T) {
	b := newBench(t)
	t.Run("programmes", func(t *testing.T) {
		for _, examine := range b.examinations() {
			t.Run(examine.name, func(t *testing.T) {
				t.Parallel()
				examine.run(t)
			})
		}
	})
	b.determinism(t) // by itself: it sets the number of processors
	b.report(t)
	if *update && thorough {
		b.write(t, "EVALUATION.md")
	}
}

// examination is one independent part of the evaluation.
type examination struct {
	name string
	run  func(t *testing.T)
}

// examinations lists all, the longest first.
func (b bench) examinations() (all []examination) {
	add := func(name string, run func(*testing.T)) { all = append(all, examination{name, run}) }
	if !thorough {
		for _, seconds := range []float64{2, 6} {
			add("short", func(t *testing.T) { b.everywhere(t, alone(b.recordings, "speech", seconds, -30, 1)) })
		}
		add("music", func(t *testing.T) {
			b.everywhere(t, programme{name: "music", sound: at(-30, stretch(b.music[0], 50, 5))})
		})
		return all
	}
	for _, compose := range catalogue {
		add("catalogue", func(t *testing.T) { b.everywhere(t, compose(b.recordings)) })
	}
	for _, p := range pauses {
		for _, difference := range []float64{6, 12, 18, 24} {
			add("voices", func(t *testing.T) { b.voices(t, p.name, difference, p.least, p.most) })
		}
	}
	add("evenness", b.evenness)
	for i := range 6 {
		add("wide music", func(t *testing.T) { b.wideMusic(t, i) })
	}
	add("fades", b.fades)
	add("silence and applause", b.quietParts)
	add("tones", b.tones)
	add("recovery", b.recovery)
	add("detector", b.detector)
	add("films", b.films)
	add("formats", b.formats)
	add("real recordings", b.worstSeconds)
	return all
}
