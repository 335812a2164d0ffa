package level_test

import (
	"bytes"
	"context"
	"math"
	"os"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	talk "evenshelf/engine/speech"
)

// everywhere takes a programme through every built-in profile and holds the copies to what is promised of all.
func (b bench) everywhere(t *testing.T, p programme) {
	source := b.written(t, p)
	defer os.Remove(source)
	for _, with := range profile.Builtin() {
		r := b.level(t, p, source, with)
		b.note(failedRow, r.on(), count(r.out == nil))
		if r.out == nil {
			continue
		}
		b.promised(t, r)
		b.special(r)
		r.done()
	}
}

func count(is bool) float64 {
	if is {
		return 1
	}
	return 0
}

// promised notes what holds for every recording.
func (b bench) promised(t *testing.T, r run) {
	on := r.on()
	tenths := kPowers(r.out, step)
	b.note(lengthRow, on, math.Abs(float64(r.out.Frames()-r.sound.Frames())))
	peak := truePeak(r.out)
	over := peak - float64(r.profile.Ceiling)
	b.note(readerRow, on, math.Abs(peak-float64(r.After.TruePeak)))
	if slices.Contains([]string{"clicks in quiet speech", "noise of the whole band"}, r.name) {
		b.note(clickRow, on, over)
	} else {
		b.note(peakRow, on, over)
	}
	if r.reachable() {
		mono := 0.0
		if len(r.out) == 1 && r.profile.Mono == audio.TwoLoudspeakers {
			mono = 10 * math.Log10(2)
		}
		if r.Plan.Anchor == profile.Speech {
			b.note(speechRow, on, math.Abs(spoken(r, tenths)+mono-float64(r.profile.Target)))
		} else {
			b.note(integratedRow, on, math.Abs(integratedOf(tenths)+mono-float64(r.profile.Target)))
		}
	}
	if r.profile.Name == "rotation" && r.reachable() && r.seconds() < 62 && len(r.sound) < 6 {
		b.note(opinionRow, on, math.Abs(secondOpinion(t, r.path)-integratedOf(tenths)))
	}
	if r.Foreseen != nil {
		b.note(foreseenRow, on, math.Abs(float64(r.Foreseen.Integrated-r.After.Integrated)))
	}
	if !r.Plan.Untouched {
		b.note(lagRow, on, math.Abs(float64(lag(r.sound[0], r.out[0]))))
		if len(r.sound) > 1 {
			b.note(imageRow, on, imageError(r.sound, r.out))
		}
	}
	if r.Treatment != nil {
		b.note(limitedRow, on, float64(r.Treatment.Limited1))
	}
	if r.Verdict.State != level.Done || r.Verdict.Reason != "" {
		b.line("Verdicts", "| %s | %s | %s |", on, r.Verdict.State, r.Verdict.Reason)
	}
	b.again(t, r)
}

// spoken is the loudness of the 400 ms of a copy in which somebody speaks in the source, as the engine sees it.
func spoken(r run, tenths []float64) float64 {
	var of []float64
	for i, p := range windows(tenths, 4) {
		for _, likely := range r.Before.Timeline.Speech[i : i+4] {
			if likely >= talk.Likely {
				of = append(of, p)
				break
			}
		}
	}
	return lufs(mean(gated(of, 10)))
}

// again levels a copy once more with its own profile: it has to stay as it is, to the last byte.
func (b bench) again(t *testing.T, r run) {
	second := b.path()
	defer os.Remove(second)
	o, err := b.engine.Level(context.Background(), r.path, level.Task{Profile: r.profile}, second)
	if err != nil {
		t.Fatalf("%s, again: %v", r.on(), err)
	}
	if o.After == nil {
		b.note(failedRow, r.on()+", again", 1)
		return
	}
	to := againRow
	if r.Verdict.State != level.Done {
		to = againHeld // it is not within its profile, and waits for a person
	}
	same := o.Plan.Untouched && bytes.Equal(content(t, r.path), content(t, second))
	b.note(to, r.on(), count(!same))
	if !same {
		b.line("Not left alone the second time", "| %s | %s | %s %.2f | %.1f → %.1f | %s %.2f → %.2f | %.1f → %.1f | %s |", r.on(), r.Verdict.State,
			r.Plan.Anchor, r.Plan.Anchored, r.Before.Range, r.After.Range, o.Plan.Anchor, o.Plan.Anchored, o.After.Integrated, o.Before.Range, o.After.Range, o.Plan.Reason)
	}
}

func content(t *testing.T, path string) []byte {
	t.Helper()
	all, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return all
}

// special notes what only some programmes show.
func (b bench) special(r run) {
	if r.profile.Name != "talk" || r.seconds() < 60 || r.Plan.Anchor != profile.Speech || strings.HasPrefix(r.name, "film") {
		return
	}
	to := talkRange
	if slices.Contains([]string{"speech with a fan", "speech with hum", "applause after speech", "silence of 8 s", "speech and music in turns"}, r.name) {
		to = otherRange
	}
	b.note(to, r.on(), loudnessRange(kPowers(r.out, step)))
}
