package web

import (
	"testing"

	"evenshelf/engine/profile"
	"evenshelf/store"
)

func TestRunSaysWhatItAsksFor(t *testing.T) {
	const copies, inPlace = "levelled copies; originals not touched", "levelled files in place of the originals, which go to the attic first"
	for _, c := range []struct {
		r        store.Run
		want     string
		measures bool
	}{
		{store.Run{Delivery: store.Copy, Format: profile.OwnFormat, Group: profile.Alone}, copies, false},
		{store.Run{Delivery: store.Copy, Format: profile.MP3, BitRate: 192}, "MP3, 192 kbit/s: " + copies, false},
		{store.Run{Delivery: store.Replace, BitRate: 96, Group: profile.Folder}, "96 kbit/s, one gain for a folder: " + inPlace, false},
		{store.Run{Delivery: store.Tags, Format: profile.MP3, Group: profile.Album}, "one gain for an album: gain tags written into the files; the originals go to the attic first", true},
		{store.Run{Delivery: store.Measure, Format: profile.MP3, Group: profile.Album}, "only measuring, nothing is written", true},
	} {
		if v := viewRun(c.r, noon); v.Delivers != c.want || v.Measures != c.measures {
			t.Errorf("%+v: %q, %v, want %q", c.r, v.Delivers, v.Measures, c.want)
		}
	}
	if rates := bitRates(); len(rates) < 8 || rates[0] != 32 || rates[len(rates)-1] != 320 {
		t.Errorf("%v", rates)
	}
}
