package media

import (
	"context"
	"encoding/binary"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// Both FLAC decoders deliver what the reference encoder was given, bit for bit, and say the same about it.
func TestFLACDecodersAgree(t *testing.T) {
	for _, test := range []struct {
		channels, bits, frames int
		args                   []string
	}{
		{1, 8, 5001, nil}, {2, 8, 4096, nil}, {2, 12, 20_001, nil}, {1, 16, 1, nil}, {2, 16, 30_001, nil},
		{2, 16, 16, []string{"-b", "16", "--lax"}}, {2, 16, 9999, []string{"-0", "-b", "1152"}},
		{2, 16, 70_001, []string{"-8", "-b", "16384", "--lax"}}, {2, 16, 5000, []string{"-5", "-l", "32", "--lax", "-p"}},
		{2, 20, 12_345, nil}, {6, 16, 10_007, nil}, {2, 24, 30_001, []string{"-8"}}, {1, 24, 4097, nil}, {6, 24, 30_001, nil},
	} {
		name := fmt.Sprintf("%d channels, %d bits, %d frames %v", test.channels, test.bits, test.frames, test.args)
		snd := programme(test.channels, test.frames, test.bits, 0.99)
		layout := audio.UsualLayout(test.channels)
		container := (test.bits + 7) / 8
		data := interleaved(snd, 8*container)
		if container == 1 { // 8 bits are unsigned in WAV
			for i := range data {
				data[i] ^= 0x80
			}
		}
		wav := save(t, "a.wav", riffFile(extFmt(1, test.channels, 44100, container, test.bits, int64(layout.Mask)), riffChunk("data", string(data))))
		path := filepath.Join(t.TempDir(), "a.flac")
		run(t, "flac", append(append([]string{"-s"}, test.args...), "-o", path, wav)...)
		for decoder, read := range flacDecoders(t) {
			got, info := drained(t, read(path))
			sameSound(t, got, snd)
			if info.Frames != int64(test.frames) || info.BitDepth != test.bits || info.Format.Rate != 44100 || info.Format.Layout != layout ||
				info.FormatName() != "flac" || !strings.Contains(info.Decoder, decoder) {
				t.Errorf("%s: %+v, mask %#x", name, info, info.Format.Layout.Mask)
			}
		}
	}
}

// Short FLACs are read here, long ones by FFmpeg.
func TestLongFLACIsLeftToFFmpeg(t *testing.T) {
	dir := t.TempDir()
	for name, test := range map[string]struct {
		seconds string
		decoder string
	}{"short": {"10", "mewkiz"}, "long": {"60", "ffmpeg"}} {
		path := filepath.Join(dir, name+".flac")
		run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "sine=r=48000:d="+test.seconds, "-ac", "2", path)
		if got := open(t, withFFmpeg(t), path).Info().Decoder; !strings.HasPrefix(got, test.decoder) {
			t.Errorf("%s: %q", name, got)
		}
	}
}

// How a recording is asked for makes no difference to what it holds.
func TestBlockSizeIsNotAudible(t *testing.T) {
	dir, source := t.TempDir(), writeWAV(t, programme(2, 20_001, 16, 0.7), 44100)
	readers := map[string]func() Reader{}
	for name, args := range map[string][]string{
		"wav": nil, "flac": nil, "mp3": {"-b:a", "128k"}, "ogg": {"-c:a", "libvorbis"}, "m4a": {"-c:a", "alac"}, "aiff": {"-c:a", "pcm_s24be"},
	} {
		path := filepath.Join(dir, "a."+name)
		run(t, "ffmpeg", append(append([]string{"-v", "error", "-i", source}, args...), path)...)
		readers[name] = func() Reader { return open(t, withFFmpeg(t), path) }
		if name == "flac" || name == "mp3" {
			readers[name+" without FFmpeg"] = func() Reader { return open(t, withoutFFmpeg(), path) }
			readers[name+" by FFmpeg"] = func() Reader { return byFFmpeg(t, path) }
		}
	}
	rng := rand.New(rand.NewPCG(11, 12))
	for name, read := range readers {
		want, _ := drained(t, read())
		if want.Frames() < 20_000 {
			t.Errorf("%s: %d frames", name, want.Frames())
		}
		for _, block := range []int{1 + rng.IntN(40), 1 + rng.IntN(3000), 1 << 17} {
			got, err := drain(read(), block)
			if err != nil {
				t.Fatalf("%s in blocks of %d: %v", name, block, err)
			}
			sameSound(t, got, want)
		}
	}
}

// The kernels do what the formats say, computed here one sample at a time in float64.
func TestUnpack(t *testing.T) {
	rng := rand.New(rand.NewPCG(13, 14))
	const frames = 99
	for _, channels := range []int{1, 2, 3} {
		for _, kind := range []struct {
			bytes int
			float bool
		}{{1, false}, {2, false}, {3, false}, {4, false}, {4, true}, {8, true}} {
			raw := make([]byte, frames*channels*kind.bytes)
			for i := range raw {
				raw[i] = byte(rng.Uint32())
			}
			copy(raw, "\x00\x00\x00\x80\xFF\xFF\xFF\x7F\x00\x00\x80\xFF\xFF\x7F") // the extremes among them
			got := audio.NewBlock(channels, frames)
			unpackerFor(kind.bytes, kind.float)(got, raw, frames)
			for i := range frames {
				for c := range channels {
					b := make([]byte, 8)
					copy(b[8-kind.bytes:], raw[(i*channels+c)*kind.bytes:][:kind.bytes])
					v := binary.LittleEndian.Uint64(b)
					want := math.Ldexp(float64(int64(v)), -63)
					switch {
					case kind.bytes == 1:
						want = math.Ldexp(float64(int64(v^1<<63)), -63)
					case kind.float && kind.bytes == 4:
						want = float64(math.Float32frombits(uint32(v >> 32)))
					case kind.float:
						want = math.Float64frombits(v)
					}
					if g, w := got[c][i], float32(want); g != w && (g == g || w == w) {
						t.Fatalf("%d channels, %+v: frame %d of channel %d is %v, want %v", channels, kind, i, c, g, w)
					}
				}
			}
		}
	}
}

// What is learnt about an MPEG file from its headers is what ffprobe says about it.
func TestMPEGHeadersAgreeWithFFprobe(t *testing.T) {
	source := writeWAV(t, programme(2, 150_000, 16, 0.6), 44100)
	const exact, noted, guessed = 0, 0.01, 0.1 // how far the bit rate may be off
	for name, test := range map[string]struct {
		tool      string
		args      []string
		tolerance float64
	}{
		"constant rate":            {"lame", []string{"-b", "128"}, exact},
		"constant, without a note": {"lame", []string{"-t", "-b", "160"}, exact},
		"variable rate":            {"lame", []string{"-V", "2"}, noted},
		"variable, without a note": {"lame", []string{"-t", "-V", "4"}, guessed},
		"average rate":             {"lame", []string{"--abr", "150"}, noted},
		"mono":                     {"lame", []string{"-m", "m", "-V", "5"}, noted},
		"MPEG-2":                   {"lame", []string{"--resample", "22.05", "-b", "64"}, exact},
		"MPEG-2.5":                 {"lame", []string{"--resample", "11.025", "-m", "m", "-b", "32"}, exact},
		"by FFmpeg":                {"ffmpeg", []string{"-c:a", "libmp3lame", "-b:a", "192k", "-f", "mp3"}, exact},
		"with tags and a cover": {"ffmpeg", []string{"-i", cover(t), "-map", "0", "-map", "1", "-c:v", "copy", "-metadata", "title=T",
			"-write_id3v1", "1", "-b:a", "128k", "-f", "mp3"}, exact},
		"layer 2":       {"ffmpeg", []string{"-c:a", "mp2", "-b:a", "192k", "-f", "mp2"}, exact},
		"layer 2, mono": {"ffmpeg", []string{"-c:a", "mp2", "-ac", "1", "-ar", "24000", "-b:a", "64k", "-f", "mp2"}, exact},
	} {
		path := filepath.Join(t.TempDir(), "a.mp3")
		if test.tool == "lame" {
			run(t, "lame", slices.Concat([]string{"--quiet"}, test.args, []string{source, path})...)
		} else {
			run(t, "ffmpeg", slices.Concat([]string{"-v", "error", "-i", source}, test.args, []string{path})...)
		}
		info, said := open(t, withFFmpeg(t), path).Info(), map[string]string{}
		stream, _ := ffprobe(t, path)
		for key, value := range stream {
			said[key] = fmt.Sprint(value)
		}
		off := math.Abs(float64(info.BitRate)/float64(atoi(said["bit_rate"])) - 1)
		if info.Codec != said["codec_name"] || fmt.Sprint(info.Format.Rate) != said["sample_rate"] || info.Video ||
			fmt.Sprint(info.Format.Layout.Channels) != said["channels"] || !(off <= test.tolerance) {
			t.Errorf("%s: %+v; ffprobe says %v", name, info, said)
		}
	}
}

// FFmpeg is started as seldom as can be: never for what is read here, once to learn its version, and then
// once for a recording whose own headers say enough.
func TestFFmpegIsStartedSeldom(t *testing.T) {
	dir, log := t.TempDir(), filepath.Join(t.TempDir(), "log") // of one empty folder a start: a child may not write files
	for _, tool := range []string{"ffmpeg", "ffprobe"} {
		script := fmt.Sprintf("#!/bin/sh\nmkdir -p '%s'/$(date +%%s%%N)-%s\nexec %s \"$@\"\n", log, tool, tool)
		if err := os.WriteFile(filepath.Join(dir, tool), []byte(script), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	box := New(filepath.Join(dir, "ffmpeg"))
	read := func(path string) (started string) {
		if err := os.RemoveAll(log); err != nil {
			t.Fatal(err)
		}
		decode(t, box, path)
		list, _ := os.ReadDir(log) // there is none if nothing was started
		for _, e := range list {
			_, tool, _ := strings.Cut(e.Name(), "-")
			started += tool + " "
		}
		return started
	}
	wav := writeWAV(t, programme(2, 20_000, 16, 0.5), 44100)
	path := func(name string) string { return filepath.Join(dir, name) }
	run(t, "flac", "-s", "-o", path("a.flac"), wav)
	run(t, "lame", "--quiet", wav, path("a.mp3"))
	run(t, "ffmpeg", "-v", "error", "-i", wav, path("a.ogg"))
	for _, test := range []struct{ path, want string }{
		{wav, ""}, {path("a.flac"), ""}, {path("a.mp3"), "ffmpeg ffmpeg "}, {path("a.mp3"), "ffmpeg "}, {path("a.ogg"), "ffprobe ffmpeg "},
	} {
		if got := read(test.path); got != test.want {
			t.Errorf("%s started %q, want %q", test.path, got, test.want)
		}
	}
	if _, err := box.Create(context.Background(), path("b.wav"), Spec{Container: "wav", BitDepth: 16, Format: stereo(44100)}); err != nil {
		t.Error(err)
	}
}
