package meter

import (
	"fmt"
	"math/rand/v2"
	"path/filepath"
	"testing"

	"evenshelf/engine/audio"
)

// musicLike returns seconds of something like music: noise with a falling spectrum under a beat, so
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

// noise returns steady noise: white through a one-pole low-pass, and some of it as it is.
func noise(f audio.Format, seconds, low, white float64) audio.Block {
	rng := rand.New(rand.NewPCG(3, 4))
	b := audio.NewBlock(f.Layout.Channels, int(seconds*float64(f.Rate)))
	for c := range b {
		y := 0.0
		for i := range b[c] {
			x := rng.NormFloat64()
			y += 0.1 * (x - y)
			b[c][i] = float32(low*y + white*x)
		}
	}
	return b
}

// Everything a Reading needs but its summing up, which costs nothing a second.
func BenchmarkMeter(b *testing.B) {
	bench := func(name string, f audio.Format, sound func() audio.Block) {
		b.Run(fmt.Sprintf("%s/%d", name, f.Rate), func(b *testing.B) {
			sound, view := sound(), make(audio.Block, f.Layout.Channels)
			m, err := New(f, audio.OneChannel)
			if err != nil {
				b.Fatal(err)
			}
			once := func() {
				m.Reset()
				for at := 0; at < sound.Frames(); at += audio.BlockFrames {
					m.Write(sound.Cut(view, at, min(at+audio.BlockFrames, sound.Frames())))
				}
				m.runOut()
			}
			once() // the lists take their room
			b.ReportAllocs()
			for b.Loop() {
				once()
			}
			b.ReportMetric(f.Seconds(int64(sound.Frames()))*float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
		})
	}
	for _, rate := range []int{44100, 48000, 96000} {
		f := audio.Format{Rate: rate, Layout: audio.Stereo}
		bench("music-like", f, func() audio.Block { return musicLike(f, 30) })
	}
	f := audio.Format{Rate: 44100, Layout: audio.Stereo}
	bench("noise", f, func() audio.Block { return noise(f, 30, 0.3, 0.02) })
	bench("white-noise", f, func() audio.Block { return noise(f, 30, 0, 0.1) })
	bench("tone", f, func() audio.Block { return tone(f.Rate, 1000, 2, part{30, -6}) })
	bench("high-tone", f, func() audio.Block { return tone(f.Rate, 19000, 2, part{30, -6}) })
	music, err := filepath.Glob("/usr/share/games/asc/music/*.mp3") // Debian's asc-music
	if err != nil {
		b.Fatal(err)
	}
	for _, path := range music {
		bench(filepath.Base(path), f, func() audio.Block { return decoded(b, path, f.Rate, 2) })
	}
}
