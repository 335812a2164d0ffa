package media

import (
	"path/filepath"
	"strings"
	"testing"
)

// The tags of a FLAC come through as they were, by the word of the reference tool: two of one name, names
// that FFmpeg takes for its own or renames, what a picture shows.
func TestFLACTagsKeepTheirForm(t *testing.T) {
	snd := programme(2, 48_000, 16, 0.5)
	source := filepath.Join(t.TempDir(), "source.flac")
	run(t, "flac", "-s", "-T", "ARTIST=One", "-T", "ARTIST=Two", "-T", "COMMENT=a\nb", "-T", "LANGUAGE=eng", "-T", "DURATION=x",
		"--picture", "4|image/jpeg|On the back||"+cover(t), "-o", source, writeWAV(t, snd, 44100))
	const tags = "ARTIST=One\nARTIST=Two\nCOMMENT=a\nb\nLANGUAGE=eng\nDURATION=x\n"
	for name, box := range map[string]*Toolbox{"FFmpeg": withFFmpeg(t), "native": withoutFFmpeg()} {
		spec := flacSpec(16, 44100)
		spec.TagsFrom = source
		path := filepath.Join(t.TempDir(), "x.flac")
		write(t, box, path, spec, snd)
		run(t, "flac", "-t", "-s", path)
		if got := string(run(t, "metaflac", "--export-tags-to=-", path)); got != tags {
			t.Errorf("%s: tags %q", name, got)
		}
		got := string(run(t, "metaflac", "--list", "--block-type=PICTURE", path))
		for _, want := range []string{"type: 4 (Cover (back))", "description: On the back"} {
			if !strings.Contains(got, want) {
				t.Errorf("%s: %q is missing in\n%s", name, want, got)
			}
		}
	}
}

// What people say about a recording is kept where the format's own technical notes have the same name.
func TestTagsThatSoundTechnical(t *testing.T) {
	t.Parallel()
	box, dir := withFFmpeg(t), t.TempDir()
	snd := programme(2, 30_000, 16, 0.5)
	wav := writeWAV(t, snd, 48000)
	for name, args := range map[string][]string{
		"x.opus": {"-c:a", "libopus", "-metadata", "LANGUAGE=eng"},
		"x.ogg":  {"-c:a", "libvorbis", "-metadata", "LANGUAGE=eng"},
		"x.m4a":  {"-c:a", "aac", "-metadata:s:a", "language=eng"},
		"x.mp3": {"-i", cover(t), "-map", "0", "-map", "1", "-c:v", "copy", "-disposition:v", "attached_pic",
			"-metadata", "language=eng", "-metadata:s:v", "comment=Cover (front)", "-metadata:s:v", "title=Caption"},
	} {
		source, path := filepath.Join(dir, name), filepath.Join(dir, "copy-"+name)
		run(t, "ffmpeg", append(append([]string{"-v", "error", "-i", wav}, args...), source)...)
		r := open(t, box, source)
		spec := box.SpecFor(r.Info(), Wish{})
		spec.TagsFrom = source
		write(t, box, path, spec, snd)
		wanted := []string{"language=eng"}
		if name == "x.mp3" {
			wanted = append(wanted, "comment=cover (front)", "title=caption")
		}
		got := strings.ToLower(string(run(t, "ffprobe", "-v", "error", "-show_entries", "format_tags:stream_tags", "-of", "compact", path)))
		for _, want := range wanted {
			if !strings.Contains(got, want) {
				t.Errorf("%s: %q is missing in %s", name, want, got)
			}
		}
	}
}
