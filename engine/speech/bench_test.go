package speech

import (
	"fmt"
	"math/rand/v2"
	"testing"

	"evenshelf/engine/audio"
)

// programme is noise in bursts, stereo: as costly as any sound.
func programme(rate int, seconds float64) audio.Block {
	r := rand.New(rand.NewPCG(1, 2))
	b := audio.NewBlock(2, int(seconds*float64(rate)))
	for i := range b[0] {
		v := 0.2 * r.NormFloat64() * float64(i*5/rate%3)
		b[0][i], b[1][i] = float32(v), float32(0.7*v+0.02*r.NormFloat64())
	}
	return b
}

func BenchmarkDetector(b *testing.B) {
	for _, rate := range []int{16000, 44100, 48000, 96000} {
		b.Run(fmt.Sprintf("stereo/%d", rate), func(b *testing.B) {
			const seconds = 60
			sound, view := programme(rate, seconds), make(audio.Block, 2)
			b.ReportAllocs()
			for b.Loop() {
				d := New(audio.Format{Rate: rate, Layout: audio.Stereo})
				for at := 0; at < sound.Frames(); at += audio.BlockFrames {
					d.Write(sound.Cut(view, at, min(at+audio.BlockFrames, sound.Frames())))
				}
				d.Finish()
			}
			b.ReportMetric(seconds*float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
		})
	}
}
