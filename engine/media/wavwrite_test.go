package media

import (
	"bytes"
	"context"
	"fmt"
	"os"
	"testing"

	"github.com/go-audio/wav"

	"evenshelf/engine/audio"
)

// What was written is read by FFmpeg, sox and go-audio/wav, which know nothing of our reader.
func TestWAVWritingReadByOthers(t *testing.T) {
	for _, spec := range []Spec{wavSpec(16, false), wavSpec(24, false), wavSpec(32, false), wavSpec(32, true), wavSpec(64, true)} {
		layouts := []audio.Layout{audio.Stereo}
		if spec.BitDepth == 24 {
			layouts = []audio.Layout{audio.Mono, audio.Stereo, {Channels: 6, Mask: 0x60F}, audio.UsualLayout(6), {Channels: 10}}
		}
		for _, layout := range layouts {
			t.Run(fmt.Sprintf("%s, %s", spec.Codec, layout), func(t *testing.T) {
				t.Parallel()
				spec := spec
				spec.Format = audio.Format{Rate: 48000, Layout: layout}
				bits := min(spec.BitDepth, 24) // more does not fit a float32
				snd := programme(layout.Channels, 1001, bits, 0.8)
				path := t.TempDir() + "/.x.part"
				write(t, withoutFFmpeg(), path, spec, snd)
				if !bytes.Equal(rawInts(t, path), interleaved(snd, 32)) {
					t.Error("FFmpeg reads something else")
				}
				got, info := decode(t, withoutFFmpeg(), path)
				sameSound(t, got, snd)
				if info.Format != spec.Format || info.BitDepth != spec.BitDepth || info.Float != spec.Float || info.Codec != spec.Codec {
					t.Errorf("our reader says %+v", info)
				}
				if want := map[audio.Speaker]any{0x60F: "5.1(side)", 0x3F: "5.1"}[layout.Mask]; want != nil {
					if stream, _ := ffprobe(t, path); stream["codec_name"] != spec.Codec || stream["channel_layout"] != want {
						t.Errorf("ffprobe says %v and %v, want %v", stream["codec_name"], stream["channel_layout"], want)
					}
				}
			})
		}
	}
}

func TestWAVWritingReadBySoxAndGoAudio(t *testing.T) {
	snd := programme(2, 12_345, 16, 0.8)
	path := t.TempDir() + "/a.wav"
	write(t, withoutFFmpeg(), path, Spec{Container: "wav", BitDepth: 16, Format: stereo(44100)}, snd)
	if out := run(t, "sox", path, "-t", "s16", "-"); !bytes.Equal(out, interleaved(snd, 16)) {
		t.Error("sox reads something else")
	}
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	dec := wav.NewDecoder(f)
	buf, err := dec.FullPCMBuffer()
	if err != nil {
		t.Fatal(err)
	}
	if dec.SampleRate != 44100 || dec.BitDepth != 16 || len(buf.Data) != 2*12_345 {
		t.Fatalf("go-audio/wav reads %d Hz, %d bits, %d samples", dec.SampleRate, dec.BitDepth, len(buf.Data))
	}
	for i, v := range buf.Data {
		if v != int(snd[i%2][i/2]*32768) {
			t.Fatalf("go-audio/wav reads %d at %d", v, i)
		}
	}
}

// An odd number of bytes is padded and the padding is not counted (RIFF, 1991); no frames is a file too.
func TestWAVOddAndEmpty(t *testing.T) {
	for _, frames := range []int{0, 1, 3} {
		path := t.TempDir() + "/a.wav"
		snd := programme(1, frames, 24, 0.5)
		write(t, withoutFFmpeg(), path, Spec{Container: "wav", BitDepth: 24, Format: audio.Format{Rate: 8000, Layout: audio.Mono}}, snd)
		b := load(t, path)
		if len(b)%2 != 0 || string(b[4:8]) != u32(int64(len(b)-8)) || !bytes.Contains(b, []byte("data"+u32(int64(3*frames)))) {
			t.Errorf("%d frames: sizes are wrong: % x", frames, b)
		}
		got, _ := decode(t, withoutFFmpeg(), path)
		sameSound(t, got, snd)
	}
}

// A BW64 stays one, however short: its readers look for an audio definition model only in such.
func TestWAVStaysBW64(t *testing.T) {
	ds64 := riffChunk("ds64", u64(200)+u64(6)+u64(3)+u32(0))
	source := save(t, "a.wav", []byte("BW64\xFF\xFF\xFF\xFFWAVE"+ds64+plainFmt(1, 1, 48000, 16, 2)+riffChunk("chna", "abcd")+"data\xFF\xFF\xFF\xFF"+"123456"+riffChunk("axml", "<a/>")))
	spec := Spec{Container: "wav", BitDepth: 16, Format: audio.Format{Rate: 48000, Layout: audio.Mono}, TagsFrom: source}
	path, snd := t.TempDir()+"/b.wav", programme(1, 5, 16, 0.5)
	write(t, withoutFFmpeg(), path, spec, snd)
	body := plainFmt(1, 1, 48000, 16, 2) + riffChunk("chna", "abcd") + "data\xFF\xFF\xFF\xFF" + string(interleaved(snd, 16)) + riffChunk("axml", "<a/>")
	want := "BW64\xFF\xFF\xFF\xFFWAVE" + riffChunk("ds64", u64(uint64(4+36+len(body)))+u64(10)+u64(5)+u32(0)) + body
	if got := load(t, path); string(got) != want {
		t.Errorf("got  %q\nwant %q", got, want)
	}
	got, _ := decode(t, withoutFFmpeg(), path)
	sameSound(t, got, snd)
	if !bytes.Equal(rawInts(t, path), interleaved(snd, 32)) {
		t.Error("FFmpeg reads something else")
	}
}

// Past 4 GiB the JUNK chunk becomes ds64 (EBU Tech 3306). The limit is lowered here instead of writing
// so much.
func TestWAVBecomesRF64(t *testing.T) {
	snd := programme(2, 5000, 16, 0.8)
	path := t.TempDir() + "/a.wav"
	box := withoutFFmpeg()
	s, err := box.Create(context.Background(), path, Spec{Container: "wav", BitDepth: 16, Format: stereo(44100)})
	if err != nil {
		t.Fatal(err)
	}
	s.(*sink).w.(*wavWriter).limit = 10_000
	if err := s.WriteBlock(snd); err != nil {
		t.Fatal(err)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	b := load(t, path)
	want := "RF64\xFF\xFF\xFF\xFFWAVEds64" + u32(28) + u64(uint64(len(b)-8)) + u64(20_000) + u64(5000) + u32(0)
	if string(b[:len(want)]) != want {
		t.Errorf("head is % x\nwant    % x", b[:len(want)], want)
	}
	if !bytes.Contains(b, []byte("data\xFF\xFF\xFF\xFF")) {
		t.Error("the data chunk's 32-bit size is not 0xFFFFFFFF")
	}
	got, info := decode(t, box, path)
	sameSound(t, got, snd)
	if info.Frames != 5000 {
		t.Errorf("our reader promises %d frames", info.Frames)
	}
	if !bytes.Equal(rawInts(t, path), interleaved(snd, 32)) {
		t.Error("FFmpeg reads something else")
	}
}

// Sound that met no gain comes out bit for bit, silence stays silence, and bytes repeat.
func TestWAVWritingIsExactAndRepeatable(t *testing.T) {
	spec := Spec{Container: "wav", BitDepth: 16, Format: stereo(44100)}
	snd := programme(2, 20_000, 24, 0.8) // needs dither at 16 bits
	clear(snd[0][5000:9000])
	a, b := t.TempDir()+"/a", t.TempDir()+"/b"
	write(t, withoutFFmpeg(), a, spec, snd)
	s, err := withoutFFmpeg().Create(context.Background(), b, spec)
	if err != nil {
		t.Fatal(err)
	}
	if err := s.WriteBlock(snd); err != nil {
		t.Fatal(err)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(load(t, a), load(t, b)) {
		t.Error("the same sound in other blocks made other bytes")
	}
	got, _ := decode(t, withoutFFmpeg(), a)
	for i, x := range got[0][5000:9000] {
		if x != 0 {
			t.Fatalf("silence became %v at %d", x, 5000+i)
		}
	}
}
