package faults

import (
	"fmt"
	"testing"

	"evenshelf/engine/audio"
)

// All detectors on half a minute of music in stereo, as it is and brought to other rates, and each alone:
// what that takes includes the cutting into windows.
func BenchmarkDetector(b *testing.B) {
	for _, rate := range []int{44100, 48000, 96000} {
		sound, err := decode(recordings(b)[0].path, rate, 2, "-t", "30")
		if err != nil {
			b.Fatal(err)
		}
		f := audio.Format{Rate: rate, Layout: audio.Stereo}
		b.Run(fmt.Sprintf("all/%d", rate), func(b *testing.B) { run(b, New(f), sound) })
		if rate != 44100 {
			continue
		}
		for _, c := range New(f).checks {
			b.Run(fmt.Sprintf("%T/%d", c, rate), func(b *testing.B) {
				d := New(f)
				d.checks = []check{c}
				run(b, d, sound)
			})
		}
	}
}

func run(b *testing.B, d *Detector, sound audio.Block) {
	view := make(audio.Block, len(sound))
	b.ReportAllocs()
	for b.Loop() {
		for at := 0; at < sound.Frames(); at += audio.BlockFrames {
			d.Write(sound.Cut(view, at, min(at+audio.BlockFrames, sound.Frames())))
		}
	}
	b.ReportMetric(d.format.Seconds(int64(sound.Frames()))*float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
}
