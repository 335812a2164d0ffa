package media

import (
	"context"
	"fmt"
	"path/filepath"
	"testing"

	"evenshelf/engine/audio"
)

const benchSeconds = 30

// benchProgramme is half a minute of stereo at 44.1 kHz.
func benchProgramme() audio.Block { return programme(2, benchSeconds*44100, 24, 0.7) }

func BenchmarkRead(b *testing.B) {
	snd, dir := benchProgramme(), b.TempDir()
	for _, test := range []struct {
		name        string
		box, reader *Toolbox
		spec        Spec
	}{
		{"wav 16", withoutFFmpeg(), withoutFFmpeg(), Spec{Container: "wav", BitDepth: 16}},
		{"wav 24", withoutFFmpeg(), withoutFFmpeg(), Spec{Container: "wav", BitDepth: 24}},
		{"wav float 32", withoutFFmpeg(), withoutFFmpeg(), Spec{Container: "wav", BitDepth: 32, Float: true}},
		{"aiff 16", withoutFFmpeg(), withoutFFmpeg(), Spec{Container: "aiff", Codec: "pcm_s16be", BitDepth: 16}},
		{"aiff 24", withoutFFmpeg(), withoutFFmpeg(), Spec{Container: "aiff", Codec: "pcm_s24be", BitDepth: 24}},
		{"mp3 by FFmpeg", withFFmpeg(b), withFFmpeg(b), Spec{Container: "mp3", Codec: "mp3", BitRate: 192_000}},
		{"mp3 by go-mp3", withFFmpeg(b), withoutFFmpeg(), Spec{Container: "mp3", Codec: "mp3", BitRate: 192_000}},
		{"flac by FFmpeg", withFFmpeg(b), withFFmpeg(b), Spec{Container: "flac", Codec: "flac", BitDepth: 16}},
		{"flac by mewkiz", withFFmpeg(b), withoutFFmpeg(), Spec{Container: "flac", Codec: "flac", BitDepth: 16}},
	} {
		b.Run(test.name, func(b *testing.B) {
			path := filepath.Join(dir, fmt.Sprintf("%p", b))
			test.spec.Format = stereo(44100)
			write(b, test.box, path, test.spec, snd)
			b.ReportAllocs()
			for b.Loop() {
				r, err := test.reader.Open(context.Background(), path)
				if err != nil {
					b.Fatal(err)
				}
				if _, err := audio.Each(r, func(audio.Block) error { return nil }); err != nil {
					b.Fatal(err)
				}
				r.Close()
			}
			b.ReportMetric(benchSeconds*float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
		})
	}
}

func BenchmarkWrite(b *testing.B) {
	snd := benchProgramme()
	for _, test := range []struct {
		name string
		box  *Toolbox
		spec Spec
	}{
		{"wav 16, dithered", withoutFFmpeg(), Spec{Container: "wav", BitDepth: 16}},
		{"wav 16, shaped", withoutFFmpeg(), Spec{Container: "wav", BitDepth: 16, Shaped: true}},
		{"wav 24", withoutFFmpeg(), Spec{Container: "wav", BitDepth: 24}},
		{"aiff 24", withoutFFmpeg(), Spec{Container: "aiff", Codec: "pcm_s24be", BitDepth: 24}},
		{"flac by FFmpeg", withFFmpeg(b), Spec{Container: "flac", Codec: "flac", BitDepth: 16}},
		{"flac by mewkiz", withoutFFmpeg(), Spec{Container: "flac", Codec: "flac", BitDepth: 16}},
		{"mp3 192k", withFFmpeg(b), Spec{Container: "mp3", Codec: "mp3", BitRate: 192_000}},
	} {
		b.Run(test.name, func(b *testing.B) {
			path := filepath.Join(b.TempDir(), "x")
			test.spec.Format = stereo(44100)
			b.ReportAllocs()
			for b.Loop() {
				write(b, test.box, path, test.spec, snd)
			}
			b.ReportMetric(benchSeconds*float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
		})
	}
}
