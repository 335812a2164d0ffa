package meter

import (
	"fmt"
	"math/rand/v2"
	"testing"

	"evenshelf/engine/audio"
)

// programme returns seconds of something like music: noise with a falling spectrum under a beat, so
// that neither the peaks nor the second differences are those of a tone.
func musicLike(f audio.Format, seconds float64) audio.Block {
	rng := rand.New(rand.NewPCG(1, 2))
	b := audio.NewBlock(f.Layout.Channels, int(seconds*float64(f.Rate)))
	for c := range b {
		low := 0.0
		for i := range b[c] {
			white := rng.NormFloat64()
			low += 0.08 * (white - low)
			beat := 0.3 + 0.7*float64((f.Rate/2-i%(f.Rate/2)))/float64(f.Rate/2)
			b[c][i] = float32(min(1, max(-1, beat*(0.9*low+0.06*white))))
		}
	}
	return b
}

func BenchmarkMeter(b *testing.B) {
	for _, rate := range []int{44100, 48000, 96000} {
		b.Run(fmt.Sprintf("stereo/%d", rate), func(b *testing.B) {
			f := audio.Format{Rate: rate, Layout: audio.Stereo}
			sound, view := musicLike(f, 10), make(audio.Block, 2)
			m, err := New(f)
			if err != nil {
				b.Fatal(err)
			}
			b.ReportAllocs()
			for b.Loop() {
				m.Reset()
				for at := 0; at < sound.Frames(); at += audio.BlockFrames {
					m.Write(sound.Cut(view, at, min(at+audio.BlockFrames, sound.Frames())))
				}
				m.runOut()
			}
			b.ReportMetric(10*float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
		})
	}
}
