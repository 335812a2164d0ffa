package level_test

import (
	"context"
	"fmt"
	"math"
	"os"
	"testing"

	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	talk "evenshelf/engine/speech"
)

// detector holds the engine's idea of speech against how programmes were composed, in windows of 2 s.
func (b bench) detector(t *testing.T) {
	look := func(p programme) *level.Analysis {
		source := b.written(t, p)
		defer os.Remove(source)
		a, err := b.engine.Analyse(context.Background(), source, level.Options{})
		if err != nil {
			t.Fatal(err)
		}
		return a
	}
	found := func(p programme, a *level.Analysis, of kind) float64 {
		right, all := 0.0, 0.0
		for _, x := range p.turns {
			if x.kind != of {
				continue
			}
			for at := math.Ceil(x.from * 10); at+20 <= x.to*10; at += 5 {
				spoken := 0
				for _, likely := range a.Timeline.Speech[int(at) : int(at)+20] {
					if likely >= talk.Likely {
						spoken++
					}
				}
				all++
				right += count((spoken >= 10) == (of == speech))
			}
		}
		return right / all
	}
	p := magazine(b.recordings, 12)
	a := look(p)
	b.note(speechFound, p.name, found(p, a, speech))
	b.note(musicFound, p.name, found(p, a, song))
	for i := range pieces {
		music := programme{name: pieces[i], sound: stretch(b.music[i], 20, 90), turns: []turn{{0, 90, song, 0, 0}}}
		b.note(musicFound, music.name, found(music, look(music), song))
		mix := over(b.recordings, i)
		b.note(mixFound, mix.name, found(mix, look(mix), speech))
	}
}

// films takes film mixes through both strengths of film.
func (b bench) films(t *testing.T) {
	for _, channels := range []int{2, 6} {
		p := film(b.recordings, fmt.Sprintf("film with %d channels", channels), 16-4*(channels/6), channels)
		source := b.written(t, p)
		for _, strength := range []profile.Strength{profile.Evening, profile.Gentle} {
			with := named(t, "film")
			with.Name, with.Ride.Strength = "film, "+string(strength), strength
			r := b.level(t, p, source, with)
			tenths := kPowers(r.out, step)
			loud := func(of kind) float64 {
				var all []float64
				for _, x := range r.turns {
					if x.kind == of {
						all = append(all, part(tenths, x.from, x.to)...)
					}
				}
				return integratedOf(all)
			}
			dialogue := loud(speech)
			if strength == profile.Evening {
				b.note(anchorRow, r.on(), math.Abs(float64(r.Plan.Anchored)+27))
				b.note(dialogueRow, r.on(), math.Abs(dialogue-float64(with.Target)))
			}
			b.note(whisperRow, r.on(), loud(whisper)-dialogue)
			b.note(effectRow, r.on(), loud(effect)-dialogue)
			b.note(filmRange, r.on(), loudnessRange(tenths))
			b.line("Films", "| %d | %s | %.1f | %.1f | %.1f | %.1f → %.1f | %.2f |", channels, strength, dialogue, loud(whisper), loud(effect),
				loudnessRange(kPowers(p.sound, step)), loudnessRange(tenths), r.Plan.Anchored)
			r.done()
		}
		os.Remove(source)
	}
}
