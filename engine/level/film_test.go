package level

import (
	"context"
	"encoding/json"
	"math"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/media"
	"evenshelf/engine/profile"
)

// film makes a film of 15 seconds of real music with moving pictures.
func film(t *testing.T, name string, args ...string) string {
	t.Helper()
	dir := t.TempDir()
	sound := excerpt(t, dir, "sound.wav", 0.3)
	path := filepath.Join(dir, name)
	ffmpeg(t, nil, append(append([]string{"-f", "lavfi", "-i", "testsrc2=s=160x120:r=25:d=15", "-i", sound, "-map", "0", "-map", "1", "-map", "1",
		"-c:v", "libx264", "-preset", "ultrafast", "-ar", "48000", "-metadata:s:a:0", "language=fra", "-metadata:s:a:1", "language=eng",
		"-disposition:a:0", "default", "-disposition:a:1", "0"}, args...), path)...)
	return path
}

// titles returns the titles of a film's sound tracks and their channels, by ffprobe.
func titles(t *testing.T, path string) (list []string, channels []int) {
	t.Helper()
	out, err := exec.Command("ffprobe", "-v", "error", "-select_streams", "a", "-show_streams", "-of", "json", path).Output()
	if err != nil {
		t.Fatal(err)
	}
	var answer struct {
		Streams []struct {
			Channels int
			Tags     map[string]string
		}
	}
	if err := json.Unmarshal(out, &answer); err != nil {
		t.Fatal(err)
	}
	for _, s := range answer.Streams {
		list, channels = append(list, s.Tags["title"]+s.Tags["handler_name"]), append(channels, s.Channels)
	}
	return list, channels
}

// A film is levelled as a whole: its levelled track comes out as the profile asks, by an outside meter too, added or in
// place, in all channels or two; levelling the copy again adds no other.
func TestFilm(t *testing.T) {
	for name, args := range map[string][]string{
		"surround.mkv": {"-c:a", "ac3", "-ac", "6", "-b:a", "448k"},
		"stereo.mp4":   {"-c:a", "aac", "-b:a", "192k"},
	} {
		source := film(t, name, args...)
		for _, c := range []struct {
			where profile.Film
			mix   profile.Mix
		}{{profile.AddTrack, profile.AllChannels}, {profile.ReplaceTrack, profile.AllChannels}, {profile.AddTrack, profile.StereoMix}} {
			t.Run(name+" "+string(c.where)+" "+string(c.mix), func(t *testing.T) {
				t.Parallel()
				p := named(t, "rotation")
				p.Delivered.Film, p.Delivered.Downmix = c.where, c.mix
				e := &Engine{Media: media.Find()}
				copied := filepath.Join(t.TempDir(), name)
				o, err := e.Level(context.Background(), source, Task{Profile: p}, copied)
				if err != nil {
					t.Fatal(err)
				}
				if o.Verdict.State != Done || o.Extension != filepath.Ext(name) {
					t.Fatalf("%s %s, %s", o.Verdict.State, o.Verdict.Reason, o.Extension)
				}
				if off := math.Abs(float64(o.After.Integrated - p.Target)); off > 0.1 || o.After.TruePeak > p.Ceiling+peakTolerance {
					t.Errorf("came out at %.2f LUFS, %.2f dBTP", o.After.Integrated, o.After.TruePeak)
				}
				track := 1
				if c.where == profile.AddTrack {
					track = 2
				}
				got, channels := titles(t, copied)
				if len(got) != 1+track || c.where == profile.AddTrack && !strings.Contains(got[1], "Levelled (rotation)") {
					t.Fatalf("sound tracks %q", got)
				}
				want := 2
				if c.mix == profile.AllChannels && name == "surround.mkv" {
					want = 6
				}
				mixed := c.mix == profile.StereoMix && name == "surround.mkv"
				if channels[track-1] != want || o.Before.Channels != want || strings.Contains(o.Plan.Reason, "mix it down") != mixed {
					t.Errorf("%d channels, before %d, %q", channels[track-1], o.Before.Channels, o.Plan.Reason)
				}
				alone := filepath.Join(t.TempDir(), "alone.wav")
				ffmpeg(t, nil, "-drc_scale", "0", "-i", copied, "-map", "0:a:"+string(rune('0'+track-1)), "-c:a", "pcm_f32le", alone)
				if i, _ := secondOpinion(t, alone); math.Abs(float64(i-o.After.Integrated)) > 0.1 {
					t.Errorf("the other meter reads %.1f LUFS, we %.2f", i, o.After.Integrated)
				}
				again := filepath.Join(t.TempDir(), name)
				o, err = e.Level(context.Background(), copied, Task{Profile: p}, again)
				if err != nil || o.Verdict.State != Done {
					t.Fatal(o.Verdict, err)
				}
				if twice, _ := titles(t, again); strings.Join(twice, "|") != strings.Join(got, "|") {
					t.Errorf("levelled again it has the sound tracks %q", twice)
				}
				if c.where == profile.ReplaceTrack && !o.Plan.Untouched {
					t.Errorf("levelled again in place: %s", o.Plan.Reason)
				}
			})
		}
	}
}
