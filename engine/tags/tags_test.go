package tags

import (
	"slices"
	"testing"
)

// Worked by hand from the open specifications: gain = −18 LUFS − loudness; R128 = 256 · (−23 LUFS − loudness).
// −573 is the example of RFC 7845, 5.2.1: −2.238 dB.
func TestGainTags(t *testing.T) {
	g := Gains{Track: Loudness{Integrated: -10.11, Peak: 0.5}, Album: &Loudness{Integrated: -18.0001, Peak: -6}}
	want := [][2]string{
		{"REPLAYGAIN_TRACK_GAIN", "-7.89 dB"}, {"REPLAYGAIN_TRACK_PEAK", "1.059254"},
		{"REPLAYGAIN_ALBUM_GAIN", "0.00 dB"}, {"REPLAYGAIN_ALBUM_PEAK", "0.501187"},
	}
	if got := g.ReplayGain(); !slices.Equal(got, want) {
		t.Errorf("got %v, want %v", got, want)
	}
	g = Gains{Track: Loudness{Integrated: -23 + 573.0/256}, Album: &Loudness{Integrated: -300}}
	if got := g.R128(); !slices.Equal(got, [][2]string{{"R128_TRACK_GAIN", "-573"}, {"R128_ALBUM_GAIN", "32767"}}) {
		t.Errorf("got %v", got)
	}
	g = Gains{Track: Loudness{Integrated: -17.999, Peak: 0}}
	if got := g.ReplayGain(); got[0][1] != "0.00 dB" || len(got) != 2 {
		t.Errorf("got %v", got)
	}
}

func TestStale(t *testing.T) {
	for name, want := range map[string][2]bool{
		"replaygain_track_gain": {true, true}, "R128_ALBUM_GAIN": {true, true}, "file_gain_undo": {true, false}, "REPLAYGAIN_REFERENCE_LOUDNESS": {true, true},
		"AGAIN": {false, false}, "Bargains": {false, false}, "X3Gain": {true, false},
		"abcdNORM": {true, false}, "abcdSMPB": {true, false}, "TITLE": {false, false}, "normal": {false, false},
	} {
		if got := [2]bool{Stale(name), IsGain(name)}; got != want {
			t.Errorf("%s: %v, want %v", name, got, want)
		}
	}
}
