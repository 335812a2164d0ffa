package media

import (
	"bytes"
	"context"
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

func flacSpec(depth, rate int) Spec {
	return Spec{Container: "flac", Codec: "flac", BitDepth: depth, Format: stereo(rate)}
}

// Lossless targets hold the very samples, by the word of an outside decoder.
func TestLosslessTargets(t *testing.T) {
	for name, test := range map[string]struct {
		box  *Toolbox
		spec Spec
	}{
		"flac 16, FFmpeg": {withFFmpeg(t), flacSpec(16, 44100)},
		"flac 24, FFmpeg": {withFFmpeg(t), flacSpec(24, 96000)},
		"flac 16, native": {withoutFFmpeg(), flacSpec(16, 44100)},
		"flac 24, native": {withoutFFmpeg(), flacSpec(24, 96000)},
		"alac 24":         {withFFmpeg(t), Spec{Container: "mp4", Codec: "alac", BitDepth: 24, Format: stereo(48000)}},
		"aiff 16":         {withFFmpeg(t), Spec{Container: "aiff", Codec: "pcm_s16be", BitDepth: 16, Format: stereo(44100)}},
		"aiff 24":         {withFFmpeg(t), Spec{Container: "aiff", Codec: "pcm_s24be", BitDepth: 24, Format: stereo(44100)}},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			snd := programme(2, 20_001, test.spec.BitDepth, 0.9)
			path := filepath.Join(t.TempDir(), ".x.part")
			write(t, test.box, path, test.spec, snd)
			if !bytes.Equal(rawInts(t, path), interleaved(snd, 32)) {
				t.Error("FFmpeg's command decodes something else")
			}
			if test.spec.Codec == "flac" { // the reference decoder checks frames, length and MD5
				run(t, "flac", "-t", "-s", path)
				out := run(t, "flac", "-d", "-s", "-c", "--force-raw-format", "--endian=little", "--sign=signed", path)
				if !bytes.Equal(out, interleaved(snd, test.spec.BitDepth)) {
					t.Error("the reference decoder decodes something else")
				}
				if n := strings.TrimSpace(string(run(t, "metaflac", "--show-total-samples", path))); n != "20001" {
					t.Errorf("STREAMINFO says %s frames", n)
				}
			}
			got, info := decode(t, withFFmpeg(t), path)
			sameSound(t, got, snd)
			if info.BitDepth != test.spec.BitDepth || info.Codec != test.spec.Codec || info.Format != test.spec.Format {
				t.Errorf("%+v", info)
			}
		})
	}
}

// Lossy targets: the right codec by ffprobe's word, the source's length to the frame, aligned with it,
// and the same bytes when made again.
func TestLossyTargets(t *testing.T) {
	for name, test := range map[string]struct {
		spec   Spec
		differ float64 // dB; a misplaced frame makes them differ by more than −3
	}{
		"mp3 192k":          {Spec{Container: "mp3", Codec: "mp3", BitRate: 192_000, Format: stereo(44100)}, -12},
		"mp3 V0":            {Spec{Container: "mp3", Codec: "mp3", Format: stereo(48000)}, -12},
		"mp3 22 kHz mono":   {Spec{Container: "mp3", Codec: "mp3", BitRate: 64_000, Format: audio.Format{Rate: 22050, Layout: audio.Mono}}, -8},
		"vorbis 160k":       {Spec{Container: "ogg", Codec: "vorbis", BitRate: 160_000, Format: stereo(44100)}, -10},
		"opus 128k":         {Spec{Container: "ogg", Codec: "opus", BitRate: 128_000, Format: stereo(48000)}, -10},
		"aac 192k":          {Spec{Container: "mp4", Codec: "aac", BitRate: 192_000, Format: stereo(44100)}, -10},
		"aac 5.1 from side": {Spec{Container: "mp4", Codec: "aac", Format: audio.Format{Rate: 48000, Layout: audio.Layout{Channels: 6, Mask: 0x60F}}}, -8},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			box := withFFmpeg(t)
			snd := programme(test.spec.Format.Layout.Channels, 60_123, 24, 0.7)
			if snd := snd; len(snd) == 6 {
				clear(snd[3]) // codecs keep only the bass of the LFE channel
			}
			dir := t.TempDir()
			a, b := filepath.Join(dir, "a.part"), filepath.Join(dir, "b.part")
			write(t, box, a, test.spec, snd)
			if test.spec.BitRate > 100_000 { // once for each codec
				write(t, box, b, test.spec, snd)
				if !bytes.Equal(load(t, a), load(t, b)) {
					t.Error("made again, the bytes differ")
				}
				if stream, _ := ffprobe(t, a); stream["codec_name"] != test.spec.Codec {
					t.Errorf("ffprobe says %v", stream["codec_name"])
				}
			}
			got, info := decode(t, box, a)
			if got.Frames() != snd.Frames() || info.Frames != int64(snd.Frames()) {
				t.Fatalf("%d frames, promised %d, want %d", got.Frames(), info.Frames, snd.Frames())
			}
			if d := apart(snd, got); d > test.differ {
				t.Errorf("source and decoded differ by %.1f dB", d)
			}
			if info.Format.Rate != test.spec.Format.Rate || info.Format.Layout.Channels != test.spec.Format.Layout.Channels {
				t.Errorf("%+v", info)
			}
		})
	}
}

func TestTagsAreCarriedOver(t *testing.T) {
	box := withFFmpeg(t)
	snd := programme(2, 30_000, 16, 0.5)
	dir := t.TempDir()
	source := filepath.Join(dir, "source.flac")
	run(t, "flac", "-s", "-T", "TITLE=Läuft; = 1", "-T", "ARTIST=Nobody", "-T", "REPLAYGAIN_TRACK_GAIN=-7.00 dB", "-T", "R128_TRACK_GAIN=-573",
		"--picture", cover(t), "-o", source, writeWAV(t, snd, 48000))
	specs := map[string]struct {
		box  *Toolbox
		spec Spec
	}{
		"flac":        {box, flacSpec(16, 48000)},
		"flac native": {withoutFFmpeg(), flacSpec(16, 48000)},
		"mp3":         {box, Spec{Container: "mp3", Codec: "mp3", Format: stereo(48000)}},
		"m4a":         {box, Spec{Container: "mp4", Codec: "aac", Format: stereo(48000)}},
		"ogg":         {box, Spec{Container: "ogg", Codec: "vorbis", Format: stereo(48000)}},
	}
	for name, test := range specs {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(dir, name+".part")
			test.spec.TagsFrom = source
			write(t, test.box, path, test.spec, snd)
			stream, tags := ffprobe(t, path)
			if own, ok := stream["tags"].(map[string]any); ok { // Ogg keeps tags on the stream
				for k, v := range own {
					if s, ok := v.(string); ok {
						tags = merge(tags, k, s)
					}
				}
			}
			found := map[string]string{}
			for k, v := range tags {
				found[strings.ToUpper(k)] = v
			}
			if found["TITLE"] != "Läuft; = 1" || found["ARTIST"] != "Nobody" || found["REPLAYGAIN_TRACK_GAIN"] != "" || found["R128_TRACK_GAIN"] != "" {
				t.Errorf("tags %q", found)
			}
			streams := string(run(t, "ffprobe", "-v", "error", "-show_entries", "stream=codec_name:stream_disposition=attached_pic", "-of", "csv", path))
			if !strings.Contains(streams, "mjpeg,1") {
				t.Errorf("streams %q, without cover art", streams)
			}
			got, _ := decode(t, box, path)
			if got.Frames() != snd.Frames() {
				t.Errorf("%d frames", got.Frames())
			}
		})
	}
	// A chain: from Ogg, whose tags are on the stream, to MP3.
	path := filepath.Join(dir, "chain.part")
	write(t, box, path, Spec{Container: "mp3", Codec: "mp3", Format: stereo(48000), TagsFrom: filepath.Join(dir, "ogg.part")}, snd)
	if _, tags := ffprobe(t, path); tags["title"] != "Läuft; = 1" {
		t.Errorf("from Ogg: tags %q", tags)
	}
}

func merge(m map[string]string, k, v string) map[string]string {
	if m == nil {
		m = map[string]string{}
	}
	m[k] = v
	return m
}

func TestCreateRefuses(t *testing.T) {
	dir := t.TempDir()
	source := writeWAV(t, programme(2, 100, 16, 0.5), 44100)
	mono5k := audio.Format{Rate: 5000, Layout: audio.Mono}
	for name, test := range map[string]struct {
		box  *Toolbox
		path string
		spec Spec
		want error
	}{
		"over its own source":    {withFFmpeg(t), source, Spec{Container: "wav", BitDepth: 16, Format: stereo(44100), TagsFrom: source}, ErrUnsupported},
		"8-bit WAV":              {withFFmpeg(t), "", Spec{Container: "wav", BitDepth: 8, Format: stereo(44100)}, ErrUnsupported},
		"MP3 without FFmpeg":     {withoutFFmpeg(), "", Spec{Container: "mp3", Codec: "mp3", Format: stereo(44100)}, ErrUnsupported},
		"ALAC without FFmpeg":    {withoutFFmpeg(), "", Spec{Container: "mp4", Codec: "alac", BitDepth: 16, Format: stereo(44100)}, ErrUnsupported},
		"MP3 at 5 kHz":           {withFFmpeg(t), "", Spec{Container: "mp3", Codec: "mp3", Format: mono5k}, ErrUnsupported},
		"MP3 of 6 channels":      {withFFmpeg(t), "", Spec{Container: "mp3", Codec: "mp3", Format: audio.Format{Rate: 44100, Layout: audio.UsualLayout(6)}}, ErrUnsupported},
		"Opus at 44.1 kHz":       {withFFmpeg(t), "", Spec{Container: "ogg", Codec: "opus", Format: stereo(44100)}, ErrUnsupported},
		"nothing at all":         {withFFmpeg(t), "", Spec{}, nil},
		"a missing folder":       {withFFmpeg(t), filepath.Join(dir, "no", "x"), Spec{Container: "wav", BitDepth: 16, Format: stereo(44100)}, fs.ErrNotExist},
		"a missing tag source":   {withFFmpeg(t), "", Spec{Container: "wav", BitDepth: 16, Format: stereo(44100), TagsFrom: filepath.Join(dir, "gone")}, fs.ErrNotExist},
		"FLAC of 9 channels":     {withFFmpeg(t), "", Spec{Container: "flac", Codec: "flac", BitDepth: 16, Format: audio.Format{Rate: 44100, Layout: audio.Layout{Channels: 9}}}, ErrUnsupported},
		"a container of no name": {withFFmpeg(t), "", Spec{Container: "xyz", Codec: "abc", Format: stereo(44100)}, ErrUnsupported},
	} {
		path := test.path
		if path == "" {
			path = filepath.Join(dir, "x")
		}
		_, err := test.box.Create(context.Background(), path, test.spec)
		if err == nil || test.want != nil && !errors.Is(err, test.want) {
			t.Errorf("%s: %v", name, err)
		}
		if _, err := os.Stat(filepath.Join(dir, "x")); !errors.Is(err, fs.ErrNotExist) {
			t.Errorf("%s: a file was left behind", name)
		}
	}
	if len(load(t, source)) != 44+400 {
		t.Error("the source was touched")
	}
}

// A full disk, or an encoder that dies, is an error with a reason, at the latest from Close.
func TestWriteErrorsAreReported(t *testing.T) {
	snd := programme(2, 500_000, 16, 0.5)
	wav := Spec{Container: "wav", BitDepth: 16, Format: stereo(44100)}
	for name, test := range map[string]struct {
		box  *Toolbox
		spec Spec
	}{
		"wav": {withoutFFmpeg(), wav}, "flac native": {withoutFFmpeg(), flacSpec(16, 44100)}, "flac FFmpeg": {withFFmpeg(t), flacSpec(16, 44100)},
	} {
		err := tryWrite(context.Background(), test.box, "/dev/full", test.spec, snd)
		if err == nil || !strings.Contains(err.Error(), "/dev/full: ") {
			t.Errorf("%s on a full disk: %v", name, err)
		}
	}
	// A failed Create removes the file it made, never a device it was pointed at.
	if info, err := os.Stat("/dev/full"); err != nil || info.Mode().IsRegular() {
		t.Errorf("/dev/full is no longer a device: %v", err)
	}
	s, err := withoutFFmpeg().Create(context.Background(), filepath.Join(t.TempDir(), "x"), wav)
	if err != nil {
		t.Fatal(err)
	}
	if err := s.WriteBlock(audio.NewBlock(3, 10)); err == nil {
		t.Error("a block of three channels was taken for a stereo file")
	}
	if err := s.Close(); err == nil {
		t.Error("Close forgot the error")
	}
	if err := s.WriteBlock(snd); err == nil {
		t.Error("a closed sink takes blocks")
	}
}
