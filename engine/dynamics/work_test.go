package dynamics

import (
	"math"
	"testing"

	"evenshelf/engine/audio"
)

// The work is what came out over what went in, read off the sound: step by step, mean and deepest.
func TestWorkIsWhatHappened(t *testing.T) {
	for _, rate := range []int{11025, 44100} {
		f := audio.Format{Rate: rate, Layout: audio.Mono}
		frames := rate*3 + 777
		x := audio.NewBlock(1, frames)
		for i := range x[0] { // never small, so that every frame tells the gain
			level := []float64{0.02, 0.9, 0.05, 0.4}[i*3/rate%4]
			x[0][i] = float32(level * float64(i/7%2*2-1))
		}
		for name, p := range map[string]processor{
			"compressor": NewCompressor(f, talk),
			"ceiling":    ceiling(f, -8, ForSpeech),
			"idle":       ceiling(f, 20, ForSpeech),
		} {
			out := through(p, x, whole)
			w := p.Work()
			steps := 0
			for ; audio.Boundary(int64(steps), audio.StepsPerSecond, int64(rate)) < int64(frames); steps++ {
				from := audio.Boundary(int64(steps), audio.StepsPerSecond, int64(rate))
				to := min(audio.Boundary(int64(steps)+1, audio.StepsPerSecond, int64(rate)), int64(frames))
				mean, deepest := 0.0, 0.0
				for i := from; i < to; i++ {
					dB := -audio.ToDB(float64(out[0][i] / x[0][i]))
					mean, deepest = mean+dB/float64(to-from), max(deepest, dB)
				}
				if steps >= len(w.Mean) || math.Abs(float64(w.Mean[steps])-mean) > 1e-5 || math.Abs(float64(w.Deepest[steps])-deepest) > 1e-5 {
					t.Fatalf("%s at %d Hz, step %d: %v and %v, want %.6f and %.6f", name, rate, steps, w.Mean, w.Deepest, mean, deepest)
				}
			}
			if len(w.Mean) != steps || len(w.Deepest) != steps {
				t.Errorf("%s at %d Hz: %d steps, want %d", name, rate, len(w.Mean), steps)
			}
		}
	}
}

// Steady sound costs no memory but for the work's own growth, which is 8 bytes a tenth of a second.
func TestNothingIsAllocated(t *testing.T) {
	f := audio.Format{Rate: 48000, Layout: audio.Stereo}
	loud, quiet := noise(2, audio.BlockFrames, 2, 1), noise(2, audio.BlockFrames, 0.01, 2)
	for name, p := range map[string]processor{"compressor": NewCompressor(f, talk), "ceiling": ceiling(f, -1, ForMusic)} {
		for range 200 {
			p.Process(loud)
		}
		if n := testing.AllocsPerRun(100, func() { p.Process(loud); p.Process(quiet) }); n != 0 {
			t.Errorf("%s: %g allocations a block", name, n)
		}
	}
}

func TestNoSoundNoWork(t *testing.T) {
	f := audio.Format{Rate: 44100, Layout: audio.Stereo}
	for name, p := range map[string]processor{"compressor": NewCompressor(f, talk), "ceiling": ceiling(f, -1, ForMusic)} {
		p.Process(audio.NewBlock(2, 0))
		if b, w := p.Flush(), p.Work(); b != nil || len(w.Mean)+len(w.Deepest) != 0 {
			t.Errorf("%s: %d frames and %v of nothing", name, b.Frames(), w)
		}
	}
}
