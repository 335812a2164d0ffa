package dynamics

import (
	"math"
	"math/rand/v2"
	"path/filepath"
	"testing"

	"evenshelf/engine/audio"
)

var timings = map[string]Timing{"speech": ForSpeech, "music": ForMusic, "concert": ForConcert}

// over returns how far, dB, the true peak of x passes a ceiling of −1 dBTP once it has been through one.
func over(f audio.Format, x audio.Block, t Timing) float64 {
	return audio.ToDB(truePeak(through(ceiling(f, -1, t), x, whole)) / audio.DBTP(-1).Linear())
}

// Music (Debian's asc-music) and read speech (its pocketsphinx-testdata), far over the ceiling.
func TestRealSoundStaysUnderTheCeiling(t *testing.T) {
	type sound struct {
		rate, channels int
		from, seconds  float64
	}
	sounds := map[string]sound{}
	music, _ := filepath.Glob("/usr/share/games/asc/music/*.mp3")
	for _, path := range music {
		sounds[path] = sound{44100, 2, 40, 1.5}
	}
	speech, _ := filepath.Glob("/usr/share/pocketsphinx/test/data/librivox/*.wav")
	for _, path := range speech[:min(3, len(speech))] {
		sounds[path] = sound{16000, 1, 0, 3}
	}
	if len(music) == 0 || len(speech) == 0 {
		t.Fatal("the test sounds are not installed: packages asc-music and pocketsphinx-testdata")
	}
	worst := -99.0
	for path, s := range sounds {
		x := decoded(t, path, s.rate, s.channels, s.from, s.seconds)
		loud := driven(x, audio.DB(-1-audio.ToDB(truePeak(x)))) // its peak is at the ceiling
		for name, timing := range timings {
			for _, drive := range []audio.DB{3, 8, 14} {
				f := audio.Format{Rate: s.rate, Layout: audio.UsualLayout(s.channels)}
				dB := over(f, driven(loud, drive), timing)
				worst = max(worst, dB)
				if dB > 0 {
					t.Errorf("%s, %s, +%g dB: %.4f dB over the ceiling", filepath.Base(path), name, drive, dB)
				}
			}
		}
	}
	t.Logf("worst: %.4f dB", worst)
}

// What no recording is: full-band noise, clicks of one sample alone and in rows, steps, and tones cut in the middle
// of a period at both ends, at every usual rate.
func TestHardSoundStaysUnderTheCeiling(t *testing.T) {
	worst := map[string]float64{}
	for _, rate := range []int{8000, 11025, 44100, 48000, 96000, 192000} {
		const n = 6000
		sounds := map[string]audio.Block{"noise": noise(2, n, 4, uint64(rate)), "clicks": audio.NewBlock(2, n), "rows": audio.NewBlock(2, n),
			"steps": audio.NewBlock(2, n), "cut tones": audio.NewBlock(2, n), "bursts": noise(2, n, 5, 7),
			"clipped": noise(2, n, 2, 8)}
		rng := rand.New(rand.NewPCG(5, uint64(rate)))
		for i := range n {
			for c := range 2 {
				if rng.IntN(300) == 0 {
					sounds["clicks"][c][i] = float32(16 * (rng.Float64() - 0.5))
				}
				if i/64%8 == c {
					sounds["rows"][c][i] = float32(3 - 6*(i%2)) // half the rate, started and stopped
				}
				sounds["steps"][c][i] = float32(2 * (i/700%2*2 - 1))
				sounds["cut tones"][c][i] = float32(2 * math.Cos(2*math.Pi*(0.01+0.23*float64(c))*float64(i)))
				sounds["clipped"][c][i] = max(-1.1, min(1.1, sounds["clipped"][c][i]))
				if i/500%3 != 0 {
					sounds["bursts"][c][i] *= 0.01
				}
			}
		}
		for sound, x := range sounds {
			for name, timing := range timings {
				dB := over(audio.Format{Rate: rate, Layout: audio.Stereo}, x, timing)
				worst[sound] = max(worst[sound], dB+99)
				if dB > 0.03 {
					t.Errorf("%s at %d Hz, %s: %.4f dB over the ceiling", sound, rate, name, dB)
				}
			}
		}
	}
	for sound, dB := range worst {
		t.Logf("%s: %.4f dB", sound, dB-99)
	}
}

// One loud channel of six: it stays under the ceiling, and all channels get its gain, frame for frame.
func TestOneLoudChannelOfSix(t *testing.T) {
	f := audio.Format{Rate: 48000, Layout: audio.UsualLayout(6)}
	for loud := range 6 {
		x := noise(6, 9000, 0.05, 3)
		x[loud] = driven(audio.Block{x[loud]}, 34)[0]
		out := through(ceiling(f, -1, ForMusic), x, whole)
		if dB := audio.ToDB(truePeak(out)) + 1; dB > 0.03 || dB < -0.3 {
			t.Errorf("channel %d: %.3f dB over the ceiling", loud, dB)
		}
		for c := range x {
			for i := range x[c] {
				want := float64(x[c][i]) * float64(out[loud][i]) / float64(x[loud][i])
				if x[loud][i] != 0 && math.Abs(float64(out[c][i])-want) > 1e-6*math.Abs(float64(x[c][i])) {
					t.Fatalf("channel %d, frame %d: %g, want %g", c, i, out[c][i], want)
				}
			}
		}
	}
}
