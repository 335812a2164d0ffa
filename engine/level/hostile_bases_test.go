//go:build !race

package level

import (
	"bytes"
	"encoding/binary"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
)

// whole returns a small sound recording in every format the shelves hold, by name: what the corpus is made from. Each
// has tags, a picture or chapters where its format has room for them, so that damage meets their readers too.
func whole(t *testing.T) map[string][]byte {
	dir := t.TempDir()
	at := func(name string) string { return filepath.Join(dir, name) }
	tool := func(name string, args ...string) {
		if out, err := exec.Command(name, args...).CombinedOutput(); err != nil {
			t.Fatalf("%s %q: %v\n%s", name, args, err, out)
		}
	}
	tool("sox", "-V1", "-R", "-n", "-r", "44100", "-b", "16", "-c", "2", at("pcm16.wav"),
		"synth", "1.7", "pinknoise", "tremolo", "2", "80", "vol", "0.3")
	notes := at("notes.txt")
	if err := os.WriteFile(notes, []byte(";FFMETADATA1\ntitle=An evening\nartist=Nobody\nalbum=Odds\ncomment=made for tests\n"+
		"[CHAPTER]\nTIMEBASE=1/1000\nSTART=0\nEND=800\ntitle=One\n[CHAPTER]\nTIMEBASE=1/1000\nSTART=800\nEND=1700\ntitle=Two\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	ffmpeg(t, nil, "-f", "lavfi", "-i", "color=c=teal:s=32x32", "-frames:v", "1", at("art.png"))
	encode := func(name string, picture bool, args ...string) {
		in := []string{"-i", at("pcm16.wav"), "-i", notes, "-i", at("art.png"), "-map", "0:a"}
		if picture {
			in = append(in, "-map", "2:v", "-c:v", "copy", "-disposition:v", "attached_pic")
		}
		ffmpeg(t, nil, append(append(append(in, "-map_metadata", "1"), args...), at(name))...)
	}
	film := func(name string, args ...string) {
		in := []string{"-f", "lavfi", "-i", "testsrc2=s=64x48:r=10:d=1.7", "-i", at("pcm16.wav"), "-i", notes, "-map", "0:v", "-map", "1:a", "-map_metadata", "2"}
		ffmpeg(t, nil, append(append(in, args...), at(name))...)
	}
	encode("pcm24.wav", false, "-c:a", "pcm_s24le", "-write_bext", "1")
	encode("float.wav", false, "-c:a", "pcm_f32le")
	encode("large.wav", false, "-c:a", "pcm_s16le", "-rf64", "always")
	encode("a.aiff", false, "-c:a", "pcm_s16be", "-write_id3v2", "1")
	encode("a.flac", true, "-c:a", "flac")
	encode("cbr.mp3", true, "-c:a", "libmp3lame", "-b:a", "128k", "-write_id3v1", "1")
	encode("vbr.mp3", false, "-c:a", "libmp3lame", "-q:a", "2", "-ar", "22050", "-id3v2_version", "4")
	encode("a.ogg", false, "-c:a", "libvorbis")
	encode("a.opus", false, "-c:a", "libopus")
	encode("aac.m4a", true, "-c:a", "aac")
	encode("alac.m4a", true, "-c:a", "alac", "-movflags", "+faststart")
	encode("a.aac", false, "-c:a", "aac", "-f", "adts")
	film("a.mkv", "-c:v", "mpeg4", "-c:a", "flac")
	film("a.mp4", "-c:v", "mpeg4", "-c:a", "aac")
	film("a.mov", "-c:v", "mpeg4", "-c:a", "pcm_s16le")
	film("a.webm", "-c:v", "libvpx", "-c:a", "libopus")
	files := map[string][]byte{}
	for _, name := range []string{"pcm16.wav", "pcm24.wav", "float.wav", "large.wav", "a.aiff", "a.flac", "cbr.mp3", "vbr.mp3",
		"a.ogg", "a.opus", "aac.m4a", "alac.m4a", "a.aac", "a.mkv", "a.mp4", "a.mov", "a.webm"} {
		b, err := os.ReadFile(at(name))
		if err != nil {
			t.Fatal(err)
		}
		files[name] = b
	}
	return files
}

// chunk is a RIFF chunk, with its pad byte.
func chunk(id string, body []byte) []byte {
	b := binary.LittleEndian.AppendUint32([]byte(id), uint32(len(body)))
	b = append(b, body...)
	if len(body)%2 == 1 {
		b = append(b, 0)
	}
	return b
}

// box is a box of ISO base media (ISO/IEC 14496-12, 4.2).
func box(kind string, body ...[]byte) []byte {
	all := bytes.Join(body, nil)
	b := binary.BigEndian.AppendUint32(nil, uint32(8+len(all)))
	return append(append(b, kind...), all...)
}
