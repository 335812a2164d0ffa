package media

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// auditioned reads a film's track to its end as a player does, and opens it once more for seeking.
func auditioned(t *testing.T, path string, track int, frames int64) (whole []byte, again *Audition) {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	for range 2 {
		if again, err = withFFmpeg(t).Audition(t.Context(), f, track, frames); err != nil {
			t.Fatal(err)
		}
		opened := again
		t.Cleanup(func() { opened.Close() })
		if whole == nil {
			if whole, err = io.ReadAll(again); err != nil {
				t.Fatal(err)
			}
		}
	}
	return whole, again
}

// The track that is asked for is heard, whatever the film plays by itself, as a WAV file that sox reads; from a place
// inside, it goes on as it does from the begin, also where the track begins late and has a gap.
func TestAuditionOfAFilm(t *testing.T) {
	const missing = `noise=drop=between(n\,50\,90)` // packets: the gap is past 1 s
	for name, more := range map[string][]string{
		"ac3.mkv":      {"-c:a", "ac3", "-b:a", "448k"},
		"surround.mkv": {"-c:a", "ac3", "-ac:a:1", "6", "-b:a", "448k"},
		"flac.mkv":     {"-c:a", "flac"},
		"aac.mp4":      {"-c:a", "aac"},
		"opus.webm":    {"-c:a", "libopus"},
		"vorbis.mkv":   {"-c:a", "libvorbis"},
		"mp2.ts":       {"-c:a", "mp2", "-map", "-3", "-map", "-5", "-sn"},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			source := makeFilm(t, name, append(more, "-af:a:1", "asetpts=PTS+0.7537/TB", "-bsf:a:1", missing)...)
			r, err := withFFmpeg(t).OpenTrack(t.Context(), source, 2)
			if err != nil {
				t.Fatal(err)
			}
			defer r.Close()
			if r, err = Downmix(r); err != nil {
				t.Fatal(err)
			}
			snd, info := drained(t, r)
			whole, a := auditioned(t, source, 2, int64(snd.Frames()))
			wav := save(t, "a.wav", whole)
			if got, want := strings.Fields(string(run(t, "soxi", "-s", wav))+string(run(t, "soxi", "-c", wav))), fmt.Sprint([]int{snd.Frames(), 2}); fmt.Sprint(got) != want {
				t.Errorf("sox reads %s frames and channels, want %s", got, want)
			}
			heard, _ := decode(t, withoutFFmpeg(), wav)
			if d := apart(heard, snd); d > 2.0/(1<<15) {
				t.Errorf("%g away from the track", d)
			}
			for _, at := range []float64{0, 0.31, 1.7, 2.3, 4.123} {
				frame := int(at * float64(info.Format.Rate))
				if _, err := a.Seek(44+4*int64(frame), io.SeekStart); err != nil {
					t.Fatal(err)
				}
				const length = 12000
				part := make([]byte, 4*length)
				if _, err := io.ReadFull(a, part); err != nil {
					t.Fatal(err)
				}
				far, best := 0, 0.0
				for n := range 1600 { // 0, 1, −1, 2, …
					by := (n + 1) / 2 * (2*(n%2) - 1)
					sum, count := 0.0, 0
					for i := 4096; i < length; i++ {
						if j := frame + i + by; j >= 0 && j < snd.Frames() {
							d := float64(int16(le16(part[4*i:])))/(1<<15) - float64(snd[0][j])
							sum, count = sum+d*d, count+1
						}
					}
					if rms := sum / float64(max(1, count)); by == 0 || rms < best {
						far, best = by, rms
					}
				}
				most := 1 // the time is given in microseconds
				if at > 1 {
					most = 720 // onTime lets what follows a gap lie so far beside its time
				}
				if far < -most || far > most || best > 1e-9 {
					t.Errorf("from %g s on it comes %d frames early, %g away", at, far, best)
				}
			}
		})
	}
}

// What is promised is sent: silence where the track is shorter, as after it was cut, and no more where it is longer.
// What is no film is not played here.
func TestAuditionKeepsItsLength(t *testing.T) {
	source := filepath.Join(t.TempDir(), "a.mkv")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "testsrc2=s=160x120:r=25:d=1", "-f", "lavfi", "-i", "anoisesrc=d=1:r=48000", "-c:v", "mpeg4", "-c:a", "flac", source)
	for frames, size := range map[int64]int{0: 44, 1000: 2044, 96000: 192044, -5: 44} {
		whole, again := auditioned(t, source, 1, frames)
		if len(whole) != size || le32(whole[4:]) != uint32(size-8) || le32(whole[40:]) != uint32(size-44) {
			t.Errorf("%d frames: %d bytes, head % x", frames, len(whole), whole[:44])
		}
		if end, err := again.Seek(-2, io.SeekEnd); err != nil || end != int64(size)-2 {
			t.Errorf("the end is at %d: %v", end, err)
		}
		if rest, err := io.ReadAll(again); err != nil || len(rest) != 2 {
			t.Errorf("at the end %d bytes: %v", len(rest), err)
		}
		if _, err := again.Seek(-1, io.SeekStart); err == nil {
			t.Error("a place in front of the sound")
		}
	}
	film, err := os.Open(source)
	if err != nil {
		t.Fatal(err)
	}
	defer film.Close()
	long, err := withFFmpeg(t).Audition(t.Context(), film, 1, 1<<60)
	if err != nil || long.size > 1<<32-1 {
		t.Fatalf("%v: %+v", err, long)
	}
	long.Close()
	plain := save(t, "a.flac", nil)
	run(t, "ffmpeg", "-v", "error", "-y", "-i", source, "-vn", plain)
	f, err := os.Open(plain)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if _, err := withFFmpeg(t).Audition(t.Context(), f, 1, 1000); !errors.Is(err, ErrUnsupported) {
		t.Error(err)
	}
}
