package media

import (
	"fmt"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// A recording without pictures that has other tracks keeps them: packet for packet, by ffprobe, in a container of its own
// kind; where none of those is written, decoded alike in Matroska.
func TestOtherTracksOfSoundAreKept(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	srt := filepath.Join(dir, "a.srt")
	saveAs(t, srt, []byte("1\n00:00:01,500 --> 00:00:02,000\nWords\n"))
	noise := func(seed int) []string {
		return []string{"-f", "lavfi", "-i", fmt.Sprintf("anoisesrc=d=3:r=48000:a=0.2:c=pink:seed=%d", seed)}
	}
	two := append(noise(1), noise(2)...)
	for name, c := range map[string]struct {
		args      []string
		extension string
		note      string
	}{
		"two.m4a":   {append(two[:8:8], "-map", "0", "-map", "1", "-ac", "2", "-c:a", "aac"), ".m4a", ""},
		"two.mp4":   {append(two[:8:8], "-map", "0", "-map", "1", "-c:a", "aac"), ".mp4", ""},
		"words.m4b": {append(noise(1), "-i", srt, "-map", "0", "-map", "1", "-c:a", "aac", "-c:s", "mov_text", "-f", "mp4"), ".m4b", ""},
		"two.ogg":   {append(two[:8:8], "-map", "0", "-map", "1", "-c:a", "libvorbis"), ".mka", "several tracks in ogg are delivered as Matroska"},
		"two.opus":  {append(two[:8:8], "-map", "0", "-map", "1", "-c:a", "libopus"), ".mka", "several tracks"},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			source := filepath.Join(dir, name)
			run(t, "ffmpeg", append(append([]string{"-v", "error"}, c.args...), source)...)
			path, spec, snd := deliver(t, source, Wish{})
			if filepath.Ext(path) != c.extension || !strings.HasPrefix(spec.Note, c.note) || (c.note == "") != (spec.Note == "") {
				t.Errorf("%s, %q", filepath.Ext(path), spec.Note)
			}
			before, packets := streams(t, source)
			after, copied := streams(t, path)
			if len(before) != len(after) || len(after) != 2 {
				t.Fatalf("%d tracks became %d", len(before), len(after))
			}
			if c.note == "" && packets[1] != copied[1] {
				t.Errorf("the other track was not copied:\n%.300s\nwas\n%.300s", copied[1], packets[1])
			}
			other := func(path string) string {
				return string(run(t, "ffmpeg", "-v", "error", "-i", path, "-map", "0:1", "-c:a", "pcm_s16le", "-f", "streamhash", "-"))
			}
			if before[1].Type == "audio" && other(source) != other(path) {
				t.Error("the other track sounds otherwise")
			}
			if again, _ := decode(t, withFFmpeg(t), path); again.Frames() != snd.Frames() {
				t.Errorf("%d frames became %d", snd.Frames(), again.Frames())
			}
		})
	}
}

// Whoever asks for a format without room for them is told that the other tracks are left out.
func TestOtherTracksThatAreLeftOutAreNamed(t *testing.T) {
	info := Info{Container: "mp4", Codec: "aac", Format: stereo(48000), Track: 1, Titles: "\n", Others: true}
	for format, note := range map[string]string{"mp3": "no room in mp3 for its other tracks", "flac": "no room in flac", "m4a": "", "": ""} {
		s := withFFmpeg(t).SpecFor(info, Wish{Format: format})
		if (s.Film != nil) != (note == "") || !strings.Contains(s.Note, note) || (note == "") != (s.Note == "") {
			t.Errorf("%q: %+v", format, s)
		}
	}
	if !slices.Contains(filmKinds["mp4"].extensions, soundOnly["mp4"]) {
		t.Error("an M4A would lose its name")
	}
}
