package web

import (
	"testing"

	"evenshelf/engine/profile"
	"evenshelf/store"
)

func TestRunSaysWhatItAsksFor(t *testing.T) {
	for _, c := range []struct {
		r                 store.Run
		encoded, together string
		measures          bool
	}{
		{store.Run{Delivery: store.Copy, Format: profile.OwnFormat, Group: profile.Alone}, "", "", false},
		{store.Run{Delivery: store.Copy, Format: profile.MP3, BitRate: 192}, "as MP3, 192 kbit/s", "", false},
		{store.Run{Delivery: store.Replace, BitRate: 96, Group: profile.Folder}, "96 kbit/s", "one gain for a folder", false},
		{store.Run{Delivery: store.Tags, Format: profile.MP3, Group: profile.Album}, "", "one gain for an album", true},
		{store.Run{Delivery: store.Measure, Format: profile.MP3, Group: profile.Album}, "", "", true},
	} {
		if v := viewRun(c.r, noon); v.Encoded != c.encoded || v.Together != c.together || v.Measures != c.measures {
			t.Errorf("%+v: %q, %q, %v", c.r, v.Encoded, v.Together, v.Measures)
		}
	}
	if rates := bitRates(); len(rates) < 8 || rates[0] != 32 || rates[len(rates)-1] != 320 {
		t.Errorf("%v", rates)
	}
}
