package speech

import (
	"math"
	"testing"
)

// paused is speech with pauses put in, and what is known of every step: 1 programme, 0 pause, -1 neither
// (soft sounds of the speech itself, and steps that are part this, part that).
func paused(talk []float32, pauses []float64) (x []float32, truth []int) {
	const step, phrase = testRate / 10, 60
	top := -math.MaxFloat64
	for at := 0; at+step <= len(talk); at += step {
		top = max(top, level(talk[at:at+step]))
	}
	for i, at := 0, 0; at+step <= len(talk); at += step {
		x = append(x, talk[at:at+step]...)
		known := -1
		if level(talk[at:at+step]) > top-25 {
			known = 1
		}
		truth = append(truth, known)
		if at/step%phrase == phrase-1 {
			n := int(pauses[i%len(pauses)] * StepsPerSecond)
			x = append(x, make([]float32, n*step)...)
			truth = append(truth, make([]int, n)...)
			i++
		}
	}
	return x, truth
}

// level is the rms in dBFS.
func level(x []float32) float64 {
	p := 1e-20
	for _, v := range x {
		p += float64(v) * float64(v) / float64(len(x))
	}
	return 10 * math.Log10(p)
}

func TestPausesInSpeech(t *testing.T) {
	talk := all(heldOut(t).speech, spoken...)
	for _, test := range []struct {
		name        string
		noise       float64 // dBFS; the speech is at −23
		pauses      []float64
		sound, rest float64 // least share found
	}{
		{"digital silence, 0.4 to 5 s", -200, []float64{0.4, 0.6, 1, 2, 5}, 0.99, 0.99},
		{"noise at −60, 0.4 to 5 s", -60, []float64{0.4, 0.6, 1, 2, 5}, 0.99, 0.99},
		{"noise at −50, 0.4 to 5 s", -50, []float64{0.4, 0.6, 1, 2, 5}, 0.97, 0.97},
		{"noise at −50, 20 and 60 s", -50, []float64{20, 60}, 0.97, 0.97},
		{"noise at −45, 1 and 2 s", -45, []float64{1, 2}, 0.9, 0.9},
	} {
		x, truth := paused(talk, test.pauses)
		active := course(over(x, hiss(float64(len(x))/testRate, test.noise)[:len(x)])).Active
		var found, known [2]float64
		for i, v := range truth {
			if v >= 0 {
				known[v]++
				if active[i] == (v == 1) {
					found[v]++
				}
			}
		}
		sound, rest := found[1]/known[1], found[0]/known[0]
		t.Logf("%-30s programme %.3f of %4.1f s, pauses %.3f of %5.1f s", test.name, sound, known[1]/10, rest, known[0]/10)
		if sound < test.sound || rest < test.rest {
			t.Errorf("%s: want at least %.2f and %.2f", test.name, test.sound, test.rest)
		}
	}
}

func activeShare(active []bool) float64 {
	n := 0.0
	for _, a := range active {
		if a {
			n++
		}
	}
	return n / float64(len(active))
}

// Music that does not stop has no pauses, however soft it is. Heads and tails, which have some, are left out.
func TestMusicIsActive(t *testing.T) {
	for name, x := range heldOut(t).music {
		x = x[10*testRate : len(x)-15*testRate]
		for _, test := range []struct{ gain, least float64 }{{0, 0.99}, {-30, 0.98}} { // some breaks are at −40 dBFS
			share := activeShare(course(gain(x, test.gain)).Active)
			t.Logf("%s at %+g dB: %.4f active", name, test.gain, share)
			if share < test.least {
				t.Errorf("%s at %+g dB: %.4f active, want %.2f", name, test.gain, share, test.least)
			}
		}
	}
}

// A soft passage is not a pause: music 25 dB lower for 20 s.
func TestSoftPassageIsActive(t *testing.T) {
	for name, music := range heldOut(t).music {
		x := append([]float32(nil), music[60*testRate:120*testRate]...)
		copy(x[20*testRate:], gain(x[20*testRate:40*testRate], -25))
		share := activeShare(course(x).Active)
		t.Logf("%s: %.4f active", name, share)
		if share < 0.95 {
			t.Errorf("%s: %.4f active, want 0.95", name, share)
		}
	}
}

// A fade by 3 dB a second is programme until it is lost below −70 dBFS; from −20 dBFS that takes 17 s.
func TestFade(t *testing.T) {
	x := scaled(heldOut(t).music["frontiers"][60*testRate:120*testRate], -20)
	for i := len(x) / 2; i < len(x); i++ {
		x[i] *= float32(math.Pow(10, -3*float64(i-len(x)/2)/testRate/20))
	}
	active := course(x).Active
	last := 0
	for i, a := range active {
		if a {
			last = i
		}
	}
	heard, share := float64(last)/StepsPerSecond-30, activeShare(active[:last+1])
	t.Logf("heard for %.1f s of the fade, %.3f of what came before", heard, share)
	if heard < 14 || heard > 20 || share < 0.98 {
		t.Error("want 14 to 20 s and 0.98")
	}
}
