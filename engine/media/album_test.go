package media

import (
	"path/filepath"
	"testing"
)

// Albums as FFmpeg writes them in each format; its names of the tags differ from those in the file.
func TestAlbum(t *testing.T) {
	box, dir := withFFmpeg(t), t.TempDir()
	for _, name := range []string{"a.mp3", "a.flac", "a.ogg", "a.opus", "a.m4a"} {
		for _, c := range []struct {
			args []string
			want Album
		}{
			{[]string{"-metadata", "album=Two Rooms ", "-metadata", "album_artist=The House", "-metadata", "artist=A Guest"}, Album{"Two Rooms", "The House"}},
			{[]string{"-metadata", "album=Two Rooms", "-metadata", "artist=A Guest"}, Album{"Two Rooms", ""}},
			{[]string{"-metadata", "title=Alone"}, Album{}},
		} {
			path := filepath.Join(dir, name)
			args := append([]string{"-nostdin", "-v", "error", "-y", "-f", "lavfi", "-i", "sine=d=1:r=48000"}, c.args...)
			run(t, "ffmpeg", append(args, path)...)
			if got, err := box.Album(t.Context(), path); err != nil || got != c.want {
				t.Errorf("%s: %+v %v, want %+v", name, got, err, c.want)
			}
		}
	}
	for _, path := range []string{save(t, "letter.mp3", []byte("no sound in here, only words")), filepath.Join(dir, "none.mp3"), dir} {
		if got, err := box.Album(t.Context(), path); err == nil {
			t.Errorf("%s: %+v", path, got)
		}
	}
}
