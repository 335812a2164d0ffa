package level

import (
	"context"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/media"
	"evenshelf/engine/profile"
)

// A copy in another format than its source's, or than was asked for, says so and why; one that is as asked says nothing.
func TestOtherFormatsAreSaid(t *testing.T) {
	dir, e := t.TempDir(), &Engine{Media: media.Find()}
	surround := []string{"-af", "pan=5.1|FL=c0|FR=c1|FC=c0|LFE=c1|BL=c0|BR=c1"}
	for name, c := range map[string]struct {
		args   []string
		format profile.Format
		ext    string // by which FFmpeg wrote, and reads, the copy
		words  []string
	}{
		"surround.flac": {surround, "mp3", ".flac", []string{"delivered as flac (mp3 cannot be written", "no room for 6 channels"}},
		"opus.m4a":      {[]string{"-ar", "48000", "-c:a", "libopus", "-f", "mp4"}, "", ".m4a", []string{"delivered as m4a aac (m4a opus is not written here)"}},
		"plain.flac":    {nil, "opus", ".opus", []string{"delivered as opus (", "44100 Hz", "48000 Hz"}},
		"same.mp3":      {nil, "mp3", ".mp3", nil},
		"asked.flac":    {nil, "mp3", ".mp3", nil},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			p := named(t, "rotation")
			if c.format != "" {
				p.Delivered.Format = c.format
			}
			o, err := e.Level(context.Background(), excerpt(t, dir, name, 0.3, c.args...), Task{Profile: p}, filepath.Join(dir, "copy-"+name))
			if err != nil || o.Verdict.State != Done || o.Extension != c.ext || (c.words == nil) != (o.Verdict.Reason == "") {
				t.Errorf("%s: %+v, %v", o.Extension, o.Verdict, err)
			}
			for _, w := range c.words {
				if !strings.Contains(o.Verdict.Reason, w) {
					t.Errorf("%q does not say %q", o.Verdict.Reason, w)
				}
			}
		})
	}
}
