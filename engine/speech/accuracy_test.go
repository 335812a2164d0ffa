package speech

import (
	"testing"

	"evenshelf/engine/audio"
)

// How well recordings are judged that no coefficient was fitted on. The figures are shares of the active steps: by the
// window of three seconds around each alone, and by the course. Wanted of every single recording is what the project
// wants at least: speech 0.95 and music 0.94 right, speech found 10 dB over music 0.85.
func TestAccuracyOnRecordings(t *testing.T) {
	r := heldOut(t)
	talk := all(r.speech, spoken...)
	pieces := []string{"frontiers", "machine wars", "time to strike"}
	check := func(what string, speech bool, x []float32, leastWindows, leastCourse float64) {
		t.Helper()
		windows, steps := windowsOfSpeech(x), course(x).shareOfSpeech()
		if !speech {
			windows, steps = 1-windows, 1-steps
		}
		t.Logf("%-38s %4.0f s: windows %.3f, course %.3f right", what, float64(len(x))/testRate, windows, steps)
		if windows < leastWindows || steps < leastCourse {
			t.Errorf("%s: want at least %.2f and %.2f", what, leastWindows, leastCourse)
		}
	}
	for _, name := range spoken {
		check("speech: "+name, true, r.speech[name], 0.95, 0.98)
	}
	for _, name := range pieces {
		check("music: "+name, false, r.music[name], 0.94, 0.98)
	}
	for _, test := range []struct{ over, windows, course float64 }{
		{20, 0.95, 0.98}, {15, 0.95, 0.98}, {12, 0.95, 0.98}, {10, 0.94, 0.98}, {6, 0.85, 0.95}, {3, 0.7, 0.9},
	} {
		for _, name := range pieces {
			mix := over(talk, scaled(r.music[name][60*testRate:60*testRate+len(talk)], -23-test.over))
			check("speech over "+name+" at "+audio.Number(test.over, 0)+" dB", true, mix, test.windows, test.course)
		}
	}
	// as loud as the music, the voice is found over two of the pieces; over the dense pad of the third mostly not
	for name, least := range map[string]float64{"frontiers": 0.1, "machine wars": 0.8, "time to strike": 0.7} {
		mix := over(talk, scaled(r.music[name][60*testRate:60*testRate+len(talk)], -23))
		check("speech over "+name+" at 0 dB", true, mix, least, least)
	}
	for _, decibels := range []float64{20, 10, 5} {
		noise := hiss(float64(len(talk))/testRate+1, -23-decibels)
		check("speech over white noise at "+audio.Number(decibels, 0)+" dB", true, over(talk, noise[:len(talk)]), 0.9, 0.95)
	}
	// of the three pieces, only this one does not break off now and then and let the voice be heard
	check("speech 15 dB under frontiers", false, over(gain(talk, -15), scaled(r.music["frontiers"][60*testRate:60*testRate+len(talk)], -23)), 0.9, 0.9)
}
