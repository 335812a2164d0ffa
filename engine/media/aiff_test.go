package media

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"io"
	"math"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// The files here are built byte by byte from the layout of the Audio Interchange File Format 1.3 (1989) and of its
// extension AIFF-C (draft of 1991).

func b16(v int) string   { return string(binary.BigEndian.AppendUint16(nil, uint16(v))) }
func b32(v int64) string { return string(binary.BigEndian.AppendUint32(nil, uint32(v))) }

// iffChunk returns a chunk with its padding.
func iffChunk(id, body string) string {
	return id + b32(int64(len(body))) + body + strings.Repeat("\x00", len(body)%2)
}

func formFile(form string, chunks ...string) []byte {
	body := form + strings.Join(chunks, "")
	return []byte("FORM" + b32(int64(len(body))) + body)
}

// rate8000 is 8000 as an 80-bit number: 1.953125 × 2^12, so the exponent is 16383 + 12 and the mantissa 0xFA << 56.
const rate8000 = "\x40\x0B\xFA\x00\x00\x00\x00\x00\x00\x00"

func comm(channels int, frames int64, bits int, coding string) string {
	if coding != "" {
		coding += "\x00\x00"
	}
	return iffChunk("COMM", b16(channels)+b32(frames)+b16(bits)+rate8000+coding)
}

func ssnd(samples string) string { return iffChunk("SSND", b32(0)+b32(0)+samples) }

func TestAIFFSampleForms(t *testing.T) {
	f32 := func(v float32) string { return b32(int64(math.Float32bits(v))) }
	f64 := func(v float64) string { return string(binary.BigEndian.AppendUint64(nil, math.Float64bits(v))) }
	for _, test := range []struct {
		name, coding string
		bits         int
		data         string
		want         []float32
		depth        int
		codec        string
		others       string // who reads the same
	}{
		{"8 bit, signed", "", 8, "\x80\x00\x7F\x01", []float32{-1, 0, 127.0 / 128, 1.0 / 128}, 8, "pcm_s8", "ffmpeg sox"},
		{"12 bit", "", 12, "\x80\x00\x7F\xF0", []float32{-1, 2047.0 / 2048}, 12, "pcm_s16be", "ffmpeg"},
		{"16 bit", "", 16, "\x80\x00\x00\x00\x7F\xFF\xFF\xFF\x00\x01", []float32{-1, 0, 32767.0 / 32768, -1.0 / 32768, 1.0 / 32768}, 16, "pcm_s16be", "ffmpeg sox"},
		{"20 bit", "", 20, "\x40\x00\x00\x00\x00\x10", []float32{0.5, 1.0 / 524288}, 20, "pcm_s24be", "ffmpeg"},
		{"24 bit", "", 24, "\x80\x00\x00\x7F\xFF\xFF\x00\x00\x01", []float32{-1, 8388607.0 / 8388608, 1.0 / 8388608}, 24, "pcm_s24be", "ffmpeg sox"},
		{"32 bit", "", 32, "\x80\x00\x00\x00\x40\x00\x00\x00", []float32{-1, 0.5}, 32, "pcm_s32be", "ffmpeg sox"},
		{"AIFC of 16 bit", "NONE", 16, "\x80\x00\x7F\xFF", []float32{-1, 32767.0 / 32768}, 16, "pcm_s16be", "ffmpeg sox"},
		{"twos", "twos", 16, "\x80\x00\x7F\xFF", []float32{-1, 32767.0 / 32768}, 16, "pcm_s16be", "ffmpeg"},
		{"sowt", "sowt", 16, "\x00\x80\xFF\x7F", []float32{-1, 32767.0 / 32768}, 16, "pcm_s16le", "ffmpeg sox"},
		{"sowt of 24 bit", "sowt", 24, "\x00\x00\x80\x01\x00\x00", []float32{-1, 1.0 / 8388608}, 24, "pcm_s24le", "sox"}, // FFmpeg takes sowt for 16 bits
		{"in24", "in24", 24, "\x80\x00\x00\x00\x00\x01", []float32{-1, 1.0 / 8388608}, 24, "pcm_s24be", "ffmpeg"},
		{"float", "fl32", 32, f32(-2.5) + f32(0.25), []float32{-2.5, 0.25}, 32, "pcm_f32be", "ffmpeg"},
		{"float of 64 bit", "fl64", 64, f64(-1.5) + f64(0.125), []float32{-1.5, 0.125}, 64, "pcm_f64be", "ffmpeg"},
	} {
		t.Run(test.name, func(t *testing.T) {
			form := "AIFF"
			if test.coding != "" {
				form = "AIFC"
			}
			path := save(t, "a.aiff", formFile(form, comm(1, int64(len(test.want)), test.bits, test.coding), ssnd(test.data)))
			got, info := decode(t, withoutFFmpeg(), path)
			sameSound(t, got, audio.Block{test.want})
			if info.BitDepth != test.depth || info.Codec != test.codec || info.Frames != int64(len(test.want)) || info.Format.Rate != 8000 {
				t.Errorf("info %+v", info)
			}
			ints := make([]float32, len(test.want))
			for i, x := range test.want {
				ints[i] = max(x, -1)
			}
			want := interleaved(audio.Block{ints}, 32)
			if strings.Contains(test.others, "ffmpeg") && !bytes.Equal(rawInts(t, path), want) {
				t.Errorf("FFmpeg reads % x, want % x", rawInts(t, path), want)
			}
			if strings.Contains(test.others, "sox") && !bytes.Equal(run(t, "sox", "-V0", path, "-t", "s32", "-"), want) {
				t.Errorf("sox reads % x, want % x", run(t, "sox", "-V0", path, "-t", "s32", "-"), want)
			}
			if stream, _ := ffprobe(t, path); strings.Contains(test.others, "ffmpeg") && stream["codec_name"] != test.codec {
				t.Errorf("ffprobe names it %v", stream["codec_name"])
			}
		})
	}
}

func TestAIFFLengths(t *testing.T) {
	const four = "\x00\x01\x00\x02\x00\x03\x00\x04"
	head := func(frames int64) string { return "FORM" + b32(0) + "AIFF" + comm(1, frames, 16, "") }
	for _, test := range []struct {
		name     string
		file     string
		frames   int
		promised int64
		torn     bool
	}{
		{"honest", string(formFile("AIFF", comm(1, 4, 16, ""), ssnd(four))), 4, 4, false},
		{"sound first", string(formFile("AIFF", ssnd(four), iffChunk("ANNO", "odd"), comm(1, 4, 16, ""))), 4, 4, false},
		{"padding forgotten", string(formFile("AIFF", "ANNO"+b32(3)+"odd", comm(1, 4, 16, ""), ssnd(four))), 4, 4, false},
		{"an offset", string(formFile("AIFF", comm(1, 4, 16, ""), iffChunk("SSND", b32(2)+b32(0)+"xx"+four))), 4, 4, false},
		{"filled up to a block", string(formFile("AIFF", comm(1, 4, 16, ""), iffChunk("SSND", b32(0)+b32(16)+four+"\x00\x05\x00\x06"))), 4, 4, false},
		{"more than it says", string(formFile("AIFF", comm(1, 2, 16, ""), ssnd(four))), 4, 4, false},
		{"less than it says", string(formFile("AIFF", comm(1, 9, 16, ""), ssnd(four), iffChunk("ANNO", "ab"))), 4, 4, false},
		{"no sound, and says so", string(formFile("AIFF", comm(1, 0, 16, ""), ssnd(""))), 0, 0, false},
		{"no sound, nor a chunk for it", string(formFile("AIFF", comm(1, 0, 16, ""))), 0, 0, false},
		{"stream: all zeros", head(0) + "SSND" + b32(0) + b32(0) + b32(0) + four, 4, -1, false}, // FFmpeg into a pipe
		{"stream: 0x7F000000", head(0x3F800000) + "SSND" + b32(0x7F000008) + b32(0) + b32(0) + four, 4, -1, false},
		{"stream: all ones", head(0xFFFFFFFF) + "SSND" + b32(0xFFFFFFFF) + b32(0) + b32(0) + four, 4, -1, false},
		{"cut", head(500) + "SSND" + b32(1008) + b32(0) + b32(0) + four, 4, 500, true},
		{"cut, COMM not filled in", head(0) + "SSND" + b32(1008) + b32(0) + b32(0) + four, 4, 500, true},
		{"torn chunk behind", string(formFile("AIFF", comm(1, 4, 16, ""), ssnd(four))) + "ANNO" + b32(99) + "ab", 4, 4, false},
		{"rubbish behind", string(formFile("AIFF", comm(1, 4, 16, ""), ssnd(four))) + strings.Repeat("\x00", 100), 4, 4, false},
	} {
		t.Run(test.name, func(t *testing.T) {
			path := save(t, "a.aiff", []byte(test.file))
			r := open(t, withoutFFmpeg(), path)
			got, err := drain(r, 3)
			if got.Frames() != test.frames || r.Info().Frames != test.promised {
				t.Errorf("%d frames, promised %d; want %d, %d", got.Frames(), r.Info().Frames, test.frames, test.promised)
			}
			// Others do not know how to go on without padding, nor of blocks.
			if alone := test.name == "padding forgotten" || test.name == "filled up to a block"; !readByAnother(t, path, got) != alone {
				t.Errorf("read alike by FFmpeg or sox: %v", alone)
			}
			for i, x := range got[0] {
				if x != float32(i+1)/32768 {
					t.Errorf("frame %d is %v", i, x)
				}
			}
			if torn := errors.Is(err, io.ErrUnexpectedEOF); torn != test.torn || !torn && err != nil {
				t.Errorf("error %v, want torn = %v", err, test.torn)
			}
		})
	}
}

func TestAIFFHostileHeaders(t *testing.T) {
	sound := ssnd("\x00\x00\x00\x00")
	common := func(channels, bits int, rate, coding string) string {
		return iffChunk("COMM", b16(channels)+b32(2)+b16(bits)+rate+coding)
	}
	for name, file := range map[string]string{
		"0 channels":            string(formFile("AIFF", comm(0, 2, 16, ""), sound)),
		"65535 channels":        string(formFile("AIFF", comm(65535, 2, 16, ""), sound)),
		"0 bits":                string(formFile("AIFF", comm(1, 2, 0, ""), sound)),
		"33 bits":               string(formFile("AIFF", comm(1, 2, 33, ""), sound)),
		"65535 bits":            string(formFile("AIFF", comm(1, 2, 65535, ""), sound)),
		"32 bits in 24":         string(formFile("AIFC", comm(1, 2, 32, "in24"), sound)),
		"rate of 0":             string(formFile("AIFF", common(1, 16, strings.Repeat("\x00", 10), ""), sound)),
		"infinite rate":         string(formFile("AIFF", common(1, 16, "\x7F\xFF\x80\x00\x00\x00\x00\x00\x00\x00", ""), sound)),
		"rate that is none":     string(formFile("AIFF", common(1, 16, "\x7F\xFF\xC0\x00\x00\x00\x00\x00\x00\x00", ""), sound)),
		"negative rate":         string(formFile("AIFF", common(1, 16, "\xC0\x0B\xFA\x00\x00\x00\x00\x00\x00\x00", ""), sound)),
		"tiny rate":             string(formFile("AIFF", common(1, 16, "\x00\x00\xFA\x00\x00\x00\x00\x00\x00\x00", ""), sound)),
		"COMM of 4 bytes":       string(formFile("AIFF", iffChunk("COMM", "\x00\x01\x00\x00"), sound)),
		"COMM of 4 GiB":         "FORM" + b32(99) + "AIFFCOMM" + b32(0xFFFFFFF0) + "\x00\x01",
		"no COMM":               string(formFile("AIFF", sound)),
		"no SSND":               string(formFile("AIFF", comm(1, 2, 16, ""))),
		"SSND of 4 bytes":       string(formFile("AIFF", comm(1, 2, 16, ""), "SSND"+b32(4)+"\x00\x00\x00\x00")),
		"an offset far outside": string(formFile("AIFF", comm(1, 2, 16, ""), iffChunk("SSND", b32(0x7FFFFFFF)+b32(0)+"\x00\x00"))),
		"ANNO past the end":     "FORM" + b32(99) + "AIFFANNO" + b32(0x7FFFFFFF) + "abcd",
		"a million chunks":      string(formFile("AIFF", strings.Repeat(iffChunk("ANNO", ""), 20_000), comm(1, 2, 16, ""), sound)),
		"only the first bytes":  "FORM" + b32(4) + "AIFF",
	} {
		t.Run(name, func(t *testing.T) {
			path := save(t, "a.aiff", []byte(file))
			for _, box := range []*Toolbox{withoutFFmpeg(), withFFmpeg(t)} {
				r, err := box.Open(context.Background(), path)
				if err == nil {
					r.Close()
					t.Fatal("opened without complaint")
				}
				var bad *FormatError
				if !errors.As(err, &bad) || !strings.HasPrefix(err.Error(), path+": ") || bad.Reason == "" {
					t.Errorf("error %q", err)
				}
			}
		})
	}
}

// Every rate that is in use, there and back; 44100 and 48000 are written out in many a header.
func TestExtendedNumbers(t *testing.T) {
	for n, want := range map[int]string{8000: rate8000, 44100: "\x40\x0E\xAC\x44\x00\x00\x00\x00\x00\x00", 48000: "\x40\x0E\xBB\x80\x00\x00\x00\x00\x00\x00"} {
		if got := string(extended(n)); got != want {
			t.Errorf("%d is % x, want % x", n, got, want)
		}
	}
	for _, n := range []int{1, 1000, 11025, 22050, 32000, 37800, 44056, 88200, 96000, 192000, 768000} {
		if got := extendedInt(extended(n)); got != n {
			t.Errorf("%d became %d", n, got)
		}
	}
	if got := extendedInt([]byte("\x40\x0E\xAC\x43\xF3\x33\x33\x33\x33\x33")); got != 44100 { // 44099.95 Hz
		t.Errorf("44099.95 Hz became %d", got)
	}
}

// What was written is read by FFmpeg and sox, and our reader agrees.
func TestAIFFWritingReadByOthers(t *testing.T) {
	for codec, written := range aiffWritten {
		for _, channels := range []int{1, 2, 6} {
			spec := Spec{Container: "aiff", Codec: codec, BitDepth: written.bits, Float: strings.HasPrefix(codec, "pcm_f")}
			spec.Format = audio.Format{Rate: 44100, Layout: audio.UsualLayout(channels)}
			snd, path := programme(channels, 1001, min(written.bits, 24), 0.8), t.TempDir()+"/a.aiff"
			write(t, withoutFFmpeg(), path, spec, snd)
			want := interleaved(snd, 32)
			wide := written.coding == "sowt" && written.bits > 16 // which FFmpeg takes for 16
			if !wide && !bytes.Equal(rawInts(t, path), want) {
				t.Errorf("%s of %d channels: FFmpeg reads something else", codec, channels)
			}
			if !spec.Float && !bytes.Equal(run(t, "sox", "-V0", path, "-t", "s32", "-"), want) {
				t.Errorf("%s of %d channels: sox reads something else", codec, channels)
			}
			got, info := decode(t, withoutFFmpeg(), path)
			sameSound(t, got, snd)
			if info.Format != spec.Format || info.Codec != codec || info.Frames != 1001 {
				t.Errorf("our reader says %+v", info)
			}
		}
	}
}

// Everything an AIFF carries comes through byte for byte, in its order, on its side of the samples, with its padding;
// an AIFC stays one, of its own coding.
func TestAIFFCarriesEverything(t *testing.T) {
	id3 := "ID3\x04\x00\x00\x00\x00\x00\x13TIT2\x00\x00\x00\x09\x00\x00\x03A title\x00"
	front := []string{iffChunk("NAME", "Odd"), iffChunk("AUTH", "Me"), iffChunk("MARK", b16(1)+b16(1)+b32(2)+"\x05Start"), iffChunk("INST", strings.Repeat("\x01", 20))}
	back := []string{iffChunk("ANNO", "first"), iffChunk("ANNO", "second"), iffChunk("COMT", b16(1)+b32(7)+b16(0)+b16(3)+"abc\x00"), iffChunk("(c) ", "2026"),
		iffChunk("APPL", "stocfoo"), iffChunk("CHAN", strings.Repeat("\x00", 12)), iffChunk("ID3 ", id3), iffChunk("Zz09", "what is this")}
	for name, test := range map[string]struct{ form, coding string }{
		"AIFF": {"AIFF", ""}, "AIFC": {"AIFC", "NONE"}, "sowt": {"AIFC", "sowt"},
	} {
		t.Run(name, func(t *testing.T) {
			chunks := append([]string{comm(1, 3, 24, test.coding)}, front...)
			if test.form == "AIFC" {
				chunks = append([]string{iffChunk("FVER", "\xA2\x80\x51\x40")}, chunks...)
			}
			source := save(t, "a.aiff", formFile(test.form, append(append(chunks, ssnd("abcdefghi")), back...)...))
			box := withoutFFmpeg()
			_, info := decode(t, box, source)
			spec := box.SpecFor(info, Wish{})
			spec.TagsFrom = source
			path, snd := t.TempDir()+"/b.aiff", programme(1, 5, 24, 0.5)
			write(t, box, path, spec, snd)
			sameChunks(t, path, source, "COMM")
			got, copied := decode(t, box, path)
			sameSound(t, got, snd)
			if copied.Codec != info.Codec || copied.Format != info.Format {
				t.Errorf("%+v became %+v", info, copied)
			}
			if b := load(t, path); string(b[8:12]) != test.form {
				t.Errorf("it became %q", b[8:12])
			}
			title := run(t, "/usr/bin/python3", "-c", "import sys, mutagen.aiff; a = mutagen.aiff.AIFF(sys.argv[1]); print(a['TIT2'], a.info.sample_rate, a.info.bits_per_sample)", path)
			if string(title) != "A title 8000 24\n" {
				t.Errorf("mutagen reads %q", title)
			}
		})
	}
}

// An ID3 tag in front of all, where careless taggers put it, is in FFmpeg's way no more than before.
func TestAIFFBehindID3(t *testing.T) {
	file := "ID3\x04\x00\x00\x00\x00\x00\x04abcd" + string(formFile("AIFF", comm(1, 2, 16, ""), ssnd("\x40\x00\x00\x01")))
	got, info := decode(t, withFFmpeg(t), save(t, "a.aiff", []byte(file)))
	sameSound(t, got, audio.Block{{0.5, 1.0 / 32768}})
	if info.Container != "aiff" {
		t.Errorf("%+v", info)
	}
}

// A file may be cut anywhere; whatever is in front of the cut is delivered or the error is clear.
func TestAIFFCutAnywhere(t *testing.T) {
	whole := formFile("AIFC", iffChunk("NAME", "abc"), comm(2, 20, 24, "NONE"), ssnd(strings.Repeat("\x11\x22\x33", 40)), iffChunk("ANNO", "x"))
	dataAt := bytes.Index(whole, []byte("SSND")) + 16
	for n := range len(whole) {
		path := save(t, "a.aiff", whole[:n])
		r, err := withoutFFmpeg().Open(context.Background(), path)
		if err != nil {
			if n >= dataAt {
				t.Errorf("cut at %d: %v", n, err)
			}
			continue
		}
		got, err := drain(r, 7)
		r.Close()
		if want := min(20, max(0, (n-dataAt)/6)); got.Frames() != want || (want < 20) != errors.Is(err, io.ErrUnexpectedEOF) {
			t.Errorf("cut at %d: %d frames (want %d), %v", n, got.Frames(), want, err)
		}
	}
}
