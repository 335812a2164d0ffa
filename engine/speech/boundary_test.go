package speech

import (
	"math"
	"slices"
	"testing"
)

// turn is a change between speech and something else: from when to when nothing of either is heard, in seconds, and
// what comes then.
type turn struct {
	from, to float64
	speech   bool
}

// turns are the changes of a course between active steps.
func turns(c Course) (all []turn) {
	was, known := false, false
	for i, on := range c.Active {
		if is := c.Speech[i] >= 0.5; on && (!known || is != was) {
			if known {
				at := float64(i) / StepsPerSecond
				all = append(all, turn{at, at, is})
			}
			was, known = is, true
		}
	}
	return all
}

// Where speech and music take turns without a pause, with a pause of half a second, or with the voice coming in over
// the music 10 dB below it, the turns are found where they are.
func TestTurnsBetweenSpeechAndMusic(t *testing.T) {
	r := heldOut(t)
	talk := all(r.speech, spoken...)
	for _, test := range []struct {
		name       string
		bed        float64 // of music under the speech, dB re the speech
		pause      int     // tenths of a second
		mean, most float64 // of the errors, seconds
	}{
		{"without a pause", -200, 0, 0.2, 1.5},
		{"half a second between", -200, 5, 0.2, 1.5},
		{"voice over music at 10 dB", -10, 0, 0.4, 2},
	} {
		var wrong []float64
		missed, extra := 0, 0
		for _, name := range []string{"frontiers", "machine wars", "time to strike"} {
			for _, from := range []int{60, 145, 230} {
				music := scaled(r.music[name][from*testRate:(from+60)*testRate], -23)
				var x []float32
				var want []turn
				for i := range 4 { // 10 s of talk, 12 s of music, and so on
					phrase := talk[i*10*testRate : (i+1)*10*testRate]
					start := float64(len(x)) / testRate
					if i > 0 {
						want[len(want)-1].to = start + quiet(phrase, false)
					}
					x = append(x, over(phrase, gain(music[:10*testRate], test.bed))...)
					if i == 3 {
						break
					}
					end := float64(len(x)) / testRate
					x = append(x, make([]float32, test.pause*testRate/10)...)
					want = append(want, turn{end - quiet(phrase, true), float64(len(x)) / testRate, false})
					x = append(x, music[i*12*testRate:(i+1)*12*testRate]...)
					want = append(want, turn{float64(len(x)) / testRate, 0, true})
					x = append(x, make([]float32, test.pause*testRate/10)...)
				}
				found := turns(course(x))
				for _, w := range want {
					best := math.Inf(1)
					for _, f := range found {
						if f.speech == w.speech {
							best = min(best, max(0, w.from-f.from, f.from-w.to))
						}
					}
					if best > 3 {
						missed++
						continue
					}
					wrong = append(wrong, best)
				}
				extra += max(0, len(found)-len(want))
			}
		}
		slices.Sort(wrong)
		mean := 0.0
		for _, e := range wrong {
			mean += e / float64(len(wrong))
		}
		t.Logf("%-26s %d turns found, %d missed, %d too many; error %.2f s on average, %.1f s median, %.1f s 90th percentile, %.1f s most",
			test.name, len(wrong), missed, extra, mean, wrong[len(wrong)/2], wrong[len(wrong)*9/10], wrong[len(wrong)-1])
		if mean > test.mean || wrong[len(wrong)-1] > test.most || missed > 0 {
			t.Errorf("%s: want at most %.1f s on average, %.1f s ever, none missed", test.name, test.mean, test.most)
		}
	}
}

// quiet is for how long a phrase is below −40 dBFS before its first sound or after its last.
func quiet(x []float32, end bool) float64 {
	const step = testRate / 100
	for n := 0; (n+1)*step <= len(x); n++ {
		at := n * step
		if end {
			at = len(x) - (n+1)*step
		}
		if level(x[at:at+step]) > -40 {
			return float64(n) / 100
		}
	}
	return float64(len(x)) / testRate
}
