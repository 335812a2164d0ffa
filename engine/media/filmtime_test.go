package media

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// lagPy prints the length of two sound tracks of films and by how many frames the second comes later, at their begin, in
// the middle and at the end: the peak of the cross-correlation of half a second, by numpy. FFmpeg decodes; when a
// track begins on the film's time line is what its first decoded frame says.
const lagPy = `
import subprocess, sys, numpy as np
def track(film, n):
    base = ['ffmpeg', '-v', 'error']
    crc = subprocess.run(base + ['-copyts', '-i', film, '-map', f'0:a:{n}', '-frames:a', '1', '-f', 'framecrc', '-'], capture_output=True, text=True, check=True).stdout.splitlines()
    num, den = [l for l in crc if l.startswith('#tb')][0].split()[-1].split('/')
    first = int([l for l in crc if not l.startswith('#')][0].split(',')[2])
    raw = subprocess.run(base + ['-i', film, '-map', f'0:a:{n}', '-af', 'aresample=async=1:min_hard_comp=0.01', '-ac', '1', '-f', 'f32le', '-'], capture_output=True, check=True).stdout
    return first * int(num) / int(den), np.frombuffer(raw, np.float32)
(t0, x), (t1, y) = track(sys.argv[1], int(sys.argv[2])), track(sys.argv[3], int(sys.argv[4]))
print(round((t1 - t0) * 48000), len(y) - len(x))
n, half = 1 << 17, 24000
for at in (0, len(x) // 2, len(x) - half - 1024):
    c = np.fft.irfft(np.fft.rfft(y[at:at+half], n) * np.conj(np.fft.rfft(x[at:at+half], n)), n)
    lag = int(np.argmax(c))
    print(lag - n if lag > n // 2 else lag)
`

// tracksApart runs lagPy: begin, the difference of length, three lags; all in frames.
func tracksApart(t testing.TB, source string, n int, copied string, m int) (v [5]int) {
	t.Helper()
	fields := strings.Fields(string(run(t, "/usr/bin/python3", "-c", lagPy, source, strconv.Itoa(n), copied, strconv.Itoa(m))))
	for i := range v {
		var err error
		if v[i], err = strconv.Atoi(fields[i]); err != nil {
			t.Fatal(err)
		}
	}
	return v
}

// The levelled track begins when its source does and stays beside it, in every codec and container, whether the source
// begins with the pictures or later, and although packets are missing from it. 1 ms is Matroska's own step; the last
// packets of AAC, AC-3 and MP3 are whole, and only MP4 can say how much of one is sound.
func TestLevelledSoundIsInSync(t *testing.T) {
	const missing = `noise=drop=between(n\,20\,30)` // packets of the first sound track
	for name, more := range map[string][]string{
		"ac3.mkv":    {"-c:a", "ac3", "-b:a", "448k"},
		"eac3.mkv":   {"-c:a", "eac3"},
		"aac.mkv":    {"-c:a", "aac"},
		"opus.mkv":   {"-c:a", "libopus"},
		"flac.mkv":   {"-c:a", "flac"},
		"vorbis.mkv": {"-c:a", "libvorbis"},
		"mp3.mkv":    {"-c:a", "libmp3lame"},
		"aac.mp4":    {"-c:a", "aac"},
		"ac3.mp4":    {"-c:a", "ac3"},
		"opus.mp4":   {"-c:a", "libopus"},
		"mp3.mov":    {"-c:a", "libmp3lame"},
		"opus.webm":  {"-c:a", "libopus"},
	} {
		for what, change := range map[string][]string{
			"as it is": nil, "late, with a gap": {"-af:a:0", "asetpts=PTS+0.7537/TB", "-bsf:a:0", missing},
		} {
			if change == nil && !slices.Contains([]string{"aac.mp4", "aac.mkv", "flac.mkv", "opus.webm"}, name) {
				continue // the harder case is enough
			}
			t.Run(name+" "+what, func(t *testing.T) {
				t.Parallel()
				source := makeFilm(t, name, append(more, change...)...)
				path, spec, snd := deliver(t, source, Wish{Title: LevelledTitle("film")})
				if bare := len(run(t, "ffmpeg", "-v", "error", "-i", source, "-map", "0:a:0", "-f", "f32le", "-")) / 8; change != nil && snd.Frames() < bare+8000 {
					t.Errorf("%d frames, and %d without the gap", snd.Frames(), bare)
				}
				got := tracksApart(t, source, 0, path, spec.Film.Delivered()-1)
				if got[0] < -48 || got[0] > 48 || got[2] != 0 || got[3] != 0 || got[4] != 0 {
					t.Errorf("begins %d frames late, lags %v", got[0], got[2:])
				}
				longer, most := got[1], 1536
				if spec.BitDepth > 0 || spec.Codec == "opus" || spec.Codec == "vorbis" || strings.HasPrefix(spec.Container, "m4") {
					most = 0
				}
				if longer < 0 || longer > most {
					t.Errorf("%d frames longer", longer)
				}
			})
		}
	}
}

// Pictures and sound that belong together lie together in the file, although one sound track ends early and the only
// subtitle is at the end: else a player would have to jump, or to hold the film in memory. Positions are ffprobe's.
func TestFilmStaysInterleaved(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	srt, source := save(t, "a.srt", []byte("1\n00:00:58,000 --> 00:00:59,000\nLate\n")), filepath.Join(dir, "a.mkv")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "testsrc2=s=160x120:r=25:d=60", "-f", "lavfi", "-i", "anoisesrc=d=60:r=48000:a=0.2",
		"-f", "lavfi", "-i", "anoisesrc=d=5:r=48000:a=0.2", "-i", srt, "-map", "0", "-map", "1", "-map", "2", "-map", "3",
		"-c:v", "libx264", "-preset", "ultrafast", "-c:a", "ac3", "-c:s", "srt", source)
	path, _, _ := deliver(t, source, Wish{Title: LevelledTitle("film")})
	last := map[int]float64{}
	for line := range strings.Lines(string(run(t, "ffprobe", "-v", "error", "-show_packets", "-show_entries", "packet=stream_index,pts_time", "-of", "csv=p=0", path))) {
		var index int
		var at float64
		if _, err := fmt.Sscanf(line, "%d,%f", &index, &at); err != nil {
			t.Fatal(err)
		}
		last[index] = at
		if max(last[0], last[1], last[2])-min(last[0], last[1], last[2]) > 1 { // pictures, sound, levelled sound
			t.Fatalf("at %s pictures and sound are at %v s", strings.TrimSpace(line), last)
		}
	}
	if last[0] < 59 || last[2] < 59 {
		t.Errorf("the film ends at %v", last)
	}
}

// A track of MPEG-TS or PS that begins later than another stays as much later, in the copy too, and so does the levelled
// one: FFmpeg would move each to the begin of the film. The times are ffprobe's.
func TestTracksOfBroadcastsStayApart(t *testing.T) {
	t.Parallel()
	for name, args := range map[string][]string{
		"late.ts":  {"-af", "asetpts=PTS+1.68/TB", "-c:v", "libx264", "-preset", "ultrafast", "-c:a", "mp2"},
		"ac3.ts":   {"-af", "asetpts=PTS+1.68/TB", "-c:v", "libx264", "-preset", "ultrafast", "-c:a", "ac3"},
		"dvb.ts":   {"-vf", "setpts=PTS+0.8/TB", "-fps_mode", "passthrough", "-c:v", "mpeg2video", "-bf", "2", "-c:a", "mp2"},
		"late.mpg": {"-af", "asetpts=PTS+1.2/TB", "-c:v", "mpeg2video", "-c:a", "mp2"},
	} {
		t.Run(name, func(t *testing.T) {
			source := filepath.Join(t.TempDir(), name)
			run(t, "ffmpeg", append(append([]string{"-v", "error", "-copyts", "-f", "lavfi", "-i", "testsrc2=s=160x120:r=25:d=5", "-f", "lavfi", "-i", "anoisesrc=d=4:r=48000:a=0.2:c=pink:seed=1",
				"-ac", "2"}, args...), source)...)
			path, spec, _ := deliver(t, source, Wish{Title: LevelledTitle("film")})
			before, _ := streams(t, source)
			after, _ := streams(t, path)
			if len(before) != 2 || len(after) != 3 || spec.Container != "matroska" {
				t.Fatalf("%d tracks became %d in %s", len(before), len(after), spec.Container)
			}
			start := func(s stream) float64 {
				at, err := strconv.ParseFloat(s.Start, 64)
				if err != nil {
					t.Fatal(err)
				}
				return at
			}
			apart := start(before[1]) - start(before[0])
			if math.Abs(apart) < 0.7 {
				t.Fatalf("the tracks of the source are %.3f s apart", apart)
			}
			for _, s := range after[1:] {
				if got := start(s) - start(after[0]); math.Abs(got-apart) > startSlack {
					t.Errorf("sound track %d comes %.3f s after the pictures instead of %.3f s", s.Index, got, apart)
				}
			}
			if got := tracksApart(t, path, 0, path, 1); got[0] < -48 || got[0] > 48 || got[2] != 0 || got[3] != 0 || got[4] != 0 {
				t.Errorf("begins %d frames late, lags %v", got[0], got[2:])
			}
		})
	}
}

// A track that came out beside its time is refused, also where the container is another.
func TestDriftIsRefused(t *testing.T) {
	source := filepath.Join(t.TempDir(), "a.mkv")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "testsrc2=s=160x120:r=25:d=1", "-f", "lavfi", "-i", "anoisesrc=d=1", "-c:v", "mpeg4", "-c:a", "flac", source)
	f, err := os.Open(source)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	for late, refused := range map[float64]bool{0: false, 0.01: true, -0.8: true} {
		w := &filmWriter{ffWriter: &ffWriter{f: f}, tool: withFFmpeg(t), ctx: t.Context(), expect: []expected{
			{kind: "video", codec: "mpeg4", slack: startSlack}, {kind: "audio", codec: "flac", start: late, slack: startSlack}}}
		if err := w.check(); (err != nil) != refused {
			t.Errorf("%g s late: %v", late, err)
		}
	}
}

// Each sound track of a film is read and levelled whatever the codecs of the others are.
func TestFilmsOfSeveralCodecs(t *testing.T) {
	for _, codecs := range [][2]string{{"aac", "ac3"}, {"ac3", "aac"}, {"dca", "ac3"}, {"libopus", "libvorbis"}, {"flac", "libmp3lame"}} {
		t.Run(fmt.Sprint(codecs), func(t *testing.T) {
			t.Parallel()
			source := filepath.Join(t.TempDir(), "a.mkv")
			run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "testsrc2=s=160x120:r=25:d=2", "-f", "lavfi", "-i", "anoisesrc=d=2:r=48000:a=0.2:seed=1", "-f", "lavfi", "-i", "anoisesrc=d=2:r=48000:a=0.1:seed=2",
				"-map", "0", "-map", "1", "-map", "2", "-c:v", "mpeg4", "-ac", "2", "-c:a:0", codecs[0], "-c:a:1", codecs[1], "-strict", "-2", source)
			box := withFFmpeg(t)
			for track := 1; track <= 2; track++ {
				r, err := box.OpenTrack(t.Context(), source, track)
				if err != nil {
					t.Fatal(err)
				}
				snd, _ := drained(t, r)
				want := len(run(t, "ffmpeg", "-v", "error", "-drc_scale", "0", "-i", source, "-map", fmt.Sprintf("0:a:%d", track-1), "-f", "f32le", "-")) / 8
				if snd.Frames() < want-1024 || snd.Frames() > want+1024 {
					t.Errorf("track %d: %d frames instead of %d", track, snd.Frames(), want)
				}
			}
			path, _, _ := deliver(t, source, Wish{Title: LevelledTitle("film")})
			if list, _ := streams(t, path); len(list) != 4 {
				t.Errorf("%d tracks", len(list))
			}
		})
	}
}

// Vorbis in Matroska says nothing in its first packet, which is the longer the lower the rate: that is no drift.
func TestVorbisOfALowRateInMatroska(t *testing.T) {
	t.Parallel()
	source := filepath.Join(t.TempDir(), "a.mka")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "anoisesrc=d=2:r=22050:a=0.2:c=pink", "-c:a", "libvorbis", source)
	path, _, snd := deliver(t, source, Wish{})
	got, _ := decode(t, withFFmpeg(t), path)
	if d := lag(snd[0], got[0]); d != 0 || got.Frames() != snd.Frames() {
		t.Errorf("%d frames late, %d of %d", d, got.Frames(), snd.Frames())
	}
}
