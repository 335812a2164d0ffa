package profile

import (
	"strings"
	"testing"
)

func TestWishes(t *testing.T) {
	p := builtIn(t, "rotation")
	if same, err := p.With(Wishes{}); err != nil || same != p {
		t.Errorf("%+v %v", same, err)
	}
	got, err := p.With(Wishes{Format: MP3, BitRate: 192})
	if err != nil || got.Delivered.Format != MP3 || got.Delivered.BitRate != 192 || got.Name != p.Name || got.Version() == p.Version() {
		t.Errorf("%+v %v", got, err)
	}
	for why, w := range map[string]Wishes{
		"delivered.format": {Format: "tape"}, "delivered.bit_rate_kbps": {BitRate: 191}, "ride.speed": {Group: Album}, "group": {Group: "disc"},
	} {
		if _, err := p.With(w); err == nil || !strings.Contains(err.Error(), why) {
			t.Errorf("%+v: %v, want a word about %s", w, err, why)
		}
	}
	for _, f := range []Format{WAV, FLAC} {
		if _, err := p.With(Wishes{Format: f, BitRate: 192}); err == nil || !strings.HasPrefix(err.Error(), "delivered.bit_rate_kbps") {
			t.Errorf("a bit rate in %s: %v", f, err)
		}
	}
	// Every built-in profile can say which recordings belong together when only tags are written.
	for _, b := range builtin {
		for _, g := range []Group{Alone, Folder, Album} {
			if got, err := b.ForTags().With(Wishes{Group: g}); err != nil || got.Group != g || got.Mono != b.Mono {
				t.Errorf("%s, %s: %v", b.Name, g, err)
			}
		}
	}
}
