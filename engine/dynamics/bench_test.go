package dynamics

import (
	"testing"

	"evenshelf/engine/audio"
)

// Ten seconds of music (Debian's asc-music), its peaks so many dB over the ceiling. engine/meter's BenchmarkMeter
// on the same file is what to compare with on a machine that has other work.
func BenchmarkDynamics(b *testing.B) {
	f := audio.Format{Rate: 44100, Layout: audio.Stereo}
	x := decoded(b, "/usr/share/games/asc/music/frontiers.mp3", f.Rate, 2, 30, 10)
	x = driven(x, audio.DB(-1-audio.ToDB(truePeak(x))))
	compression := Compression{Threshold: -18, Ratio: 3, Knee: 6, Release: 0.15}
	for _, test := range []struct {
		name  string
		drive audio.DB
		p     processor
	}{
		{"ceiling/idle", -1, ceiling(f, -1, ForMusic)},
		{"ceiling/music+3", 3, ceiling(f, -1, ForMusic)},
		{"ceiling/music+8", 8, ceiling(f, -1, ForMusic)},
		{"ceiling/speech+8", 8, ceiling(f, -1, ForSpeech)},
		{"ceiling/speech+14", 14, ceiling(f, -1, ForSpeech)},
		{"compressor/idle", -40, NewCompressor(f, compression)},
		{"compressor/busy", 0, NewCompressor(f, compression)},
	} {
		b.Run(test.name, func(b *testing.B) {
			x, view := driven(x, test.drive), make(audio.Block, 2)
			blocks := x.Frames() / audio.BlockFrames
			b.ReportAllocs()
			for b.Loop() {
				for i := range blocks {
					test.p.Process(x.Cut(view, i*audio.BlockFrames, (i+1)*audio.BlockFrames))
				}
			}
			b.ReportMetric(f.Seconds(int64(blocks*audio.BlockFrames))*float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
		})
	}
}
