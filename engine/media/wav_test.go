package media

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"io"
	"math"
	"os/exec"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// The files here are built byte by byte from the layouts of the RIFF specification (1991), of
// WAVE_FORMAT_EXTENSIBLE, of EBU Tech 3306 (RF64) and of ITU-R BS.2088 (BW64).

func u16(v int) string    { return string(binary.LittleEndian.AppendUint16(nil, uint16(v))) }
func u32(v int64) string  { return string(binary.LittleEndian.AppendUint32(nil, uint32(v))) }
func u64(v uint64) string { return string(binary.LittleEndian.AppendUint64(nil, v)) }

// riffChunk returns a chunk with its padding.
func riffChunk(id, body string) string {
	c := id + u32(int64(len(body))) + body
	if len(body)%2 == 1 {
		c += "\x00"
	}
	return c
}

func riffFile(chunks ...string) []byte {
	body := "WAVE" + strings.Join(chunks, "")
	return []byte("RIFF" + u32(int64(len(body))) + body)
}

// plainFmt is the 16-byte fmt chunk; container is bytes a sample.
func plainFmt(tag, channels, rate, bits, container int) string {
	align := channels * container
	return riffChunk("fmt ", u16(tag)+u16(channels)+u32(int64(rate))+u32(int64(rate*align))+u16(align)+u16(bits))
}

// extFmt is the 40-byte EXTENSIBLE fmt chunk.
func extFmt(tag, channels, rate, container, valid int, mask int64) string {
	align := channels * container
	return riffChunk("fmt ", u16(0xFFFE)+u16(channels)+u32(int64(rate))+u32(int64(rate*align))+u16(align)+u16(8*container)+
		u16(22)+u16(valid)+u32(mask)+u16(tag)+"\x00\x00\x00\x00\x10\x00\x80\x00\x00\xAA\x00\x38\x9B\x71")
}

func TestWAVSampleForms(t *testing.T) {
	f32 := func(v float32) string { return u32(int64(math.Float32bits(v))) }
	f64 := func(v float64) string { return u64(math.Float64bits(v)) }
	tests := []struct {
		name, fmt, data string
		want            []float32 // one channel
		depth           int
		codec           string
		others          string // who reads the same: "ffmpeg", "sox"
	}{
		{"8 bit, unsigned", plainFmt(1, 1, 8000, 8, 1), "\x00\x80\xFF\x81", []float32{-1, 0, 127.0 / 128, 1.0 / 128}, 8, "pcm_u8", "ffmpeg sox"},
		{"16 bit", plainFmt(1, 1, 8000, 16, 2), "\x00\x80\x00\x00\xFF\x7F\xFF\xFF", []float32{-1, 0, 32767.0 / 32768, -1.0 / 32768}, 16, "pcm_s16le", "ffmpeg sox"},
		{"12 bit in 16", plainFmt(1, 1, 8000, 12, 2), "\x00\x80\xF0\x7F", []float32{-1, 2047.0 / 2048}, 12, "pcm_s16le", "ffmpeg"},
		{"24 bit", plainFmt(1, 1, 8000, 24, 3), "\x00\x00\x80\xFF\xFF\x7F\x01\x00\x00", []float32{-1, 8388607.0 / 8388608, 1.0 / 8388608}, 24, "pcm_s24le", "ffmpeg sox"},
		{"24 bit in 32, extensible", extFmt(1, 1, 8000, 4, 24, 4), "\x00\x00\x00\x80\x00\x01\x00\x00", []float32{-1, 1.0 / 8388608}, 24, "pcm_s32le", ""},
		{"24 bit in 32, plain", plainFmt(1, 1, 8000, 24, 4), "\x00\x00\x00\x80\x00\x01\x00\x00", []float32{-1, 1.0 / 8388608}, 24, "pcm_s32le", ""},
		{"20 bit in 24, extensible", extFmt(1, 1, 8000, 3, 20, 4), "\x00\x00\x40\x10\x00\x00", []float32{0.5, 1.0 / 524288}, 20, "pcm_s24le", "ffmpeg"},
		{"32 bit", plainFmt(1, 1, 8000, 32, 4), "\x00\x00\x00\x80\x00\x00\x00\x40", []float32{-1, 0.5}, 32, "pcm_s32le", "ffmpeg sox"},
		{"float 32 with overs", plainFmt(3, 1, 8000, 32, 4), f32(-2.5) + f32(0.25), []float32{-2.5, 0.25}, 32, "pcm_f32le", "ffmpeg sox"},
		{"float 64", plainFmt(3, 1, 8000, 64, 8), f64(-1.5) + f64(0.125), []float32{-1.5, 0.125}, 64, "pcm_f64le", "ffmpeg sox"},
		{"float 32, extensible", extFmt(3, 1, 8000, 4, 32, 4), f32(0.75), []float32{0.75}, 32, "pcm_f32le", "ffmpeg sox"},
		{"valid bits that lie", extFmt(1, 1, 8000, 2, 99, 4), "\x00\x40", []float32{0.5}, 16, "pcm_s16le", ""},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			path := save(t, "a.wav", riffFile(test.fmt, riffChunk("data", test.data)))
			got, info := decode(t, withoutFFmpeg(), path)
			sameSound(t, got, audio.Block{test.want})
			if info.BitDepth != test.depth || info.Codec != test.codec || info.Frames != int64(len(test.want)) {
				t.Errorf("info %+v", info)
			}
			ints := slices.Clone(test.want) // which have no overs
			for i, x := range ints {
				ints[i] = max(x, -1)
			}
			want := interleaved(audio.Block{ints}, 32)
			if strings.Contains(test.others, "ffmpeg") && !bytes.Equal(rawInts(t, path), want) {
				t.Errorf("FFmpeg reads % x, want % x", rawInts(t, path), want)
			}
			if strings.Contains(test.others, "sox") && !bytes.Equal(run(t, "sox", "-V0", path, "-t", "s32", "-"), want) {
				t.Errorf("sox reads % x, want % x", run(t, "sox", "-V0", path, "-t", "s32", "-"), want)
			}
		})
	}
}

func TestWAVChannelMasks(t *testing.T) {
	tests := []struct {
		channels int
		mask     int64
		want     audio.Layout
	}{
		{6, 0x60F, audio.Layout{Channels: 6, Mask: 0x60F}},
		{6, 0x3F, audio.UsualLayout(6)},
		{2, 0, audio.Stereo},
		{1, 0, audio.Mono},
		{4, 0, audio.Layout{Channels: 4}},              // positions are not known, and said to be so
		{2, 0x3F, audio.Stereo},                        // more bits than channels: the surplus is ignored
		{3, 0x3, audio.Layout{Channels: 3}},            // fewer bits than channels
		{2, 0xFFFFFFFF, audio.Stereo},                  // nonsense
		{2, 0x30, audio.Layout{Channels: 2, Mask: 48}}, // a pair of back channels
	}
	for _, test := range tests {
		path := save(t, "a.wav", riffFile(extFmt(1, test.channels, 48000, 2, 16, test.mask), riffChunk("data", strings.Repeat("\x00\x40", 2*test.channels))))
		if _, info := decode(t, withoutFFmpeg(), path); info.Format.Layout != test.want {
			t.Errorf("%d channels, mask %#x: %+v, want %+v", test.channels, test.mask, info.Format.Layout, test.want)
		}
	}
}

func TestWAVLengths(t *testing.T) {
	four := "\x01\x00\x02\x00\x03\x00\x04\x00"
	format := plainFmt(1, 1, 8000, 16, 2)
	ds64 := func(riff, data uint64, table string) string {
		n := len(table) / 12
		return riffChunk("ds64", u64(riff)+u64(data)+u64(data/2)+u32(int64(n))+table)
	}
	// Whoever reads the high word first sees 4 GiB × 8 bytes here; low first is the standard.
	lowFirst := ds64(80, 8, "")
	tests := []struct {
		name     string
		file     string
		frames   int   // delivered
		promised int64 // Info.Frames
		torn     bool
		damage   string
	}{
		{"honest", string(riffFile(format, riffChunk("data", four))), 4, 4, false, ""},
		{"odd chunk before, padded", string(riffFile(riffChunk("odd ", "abc"), format, riffChunk("data", four))), 4, 4, false, ""},
		{"odd chunk before, padding forgotten", string(riffFile("odd "+u32(3)+"abc", format, riffChunk("data", four))), 4, 4, false, ""},
		{"stream: both sizes 0xFFFFFFFF", "RIFF\xFF\xFF\xFF\xFFWAVE" + format + "data\xFF\xFF\xFF\xFF" + four, 4, -1, false, ""},
		{"stream: both sizes 0", "RIFF" + u32(0) + "WAVE" + format + "data" + u32(0) + four, 4, -1, false, ""},
		{"no sound, and says so", string(riffFile(format, riffChunk("data", ""), riffChunk("LIST", "INFO"))), 0, 0, false, ""},
		{"promises more than there is", "RIFF" + u32(1036) + "WAVE" + format + "data" + u32(1000) + four, 4, 500, true, ""},
		{"cut inside a frame", "RIFF" + u32(44) + "WAVE" + format + "data" + u32(8) + four[:7], 3, 4, true, ""},
		{"promises less than there is", "RIFF" + u32(40) + "WAVE" + format + "data" + u32(4) + four, 2, 2, false, ""},
		{"RIFF size lies, data size does not", "RIFF" + u32(7) + "WAVE" + format + riffChunk("data", four), 4, 4, false, ""},
		{"RF64", "RF64\xFF\xFF\xFF\xFFWAVE" + lowFirst + format + "data\xFF\xFF\xFF\xFF" + four + riffChunk("cue ", "wxyz"), 4, 4, false, ""},
		{"BW64", "BW64\xFF\xFF\xFF\xFFWAVE" + lowFirst + format + "data\xFF\xFF\xFF\xFF" + four, 4, 4, false, ""},
		{"RF64, 32-bit size valid as it stands", "RF64\xFF\xFF\xFF\xFFWAVE" + ds64(80, 999, "") + format + riffChunk("data", four), 4, 4, false, ""},
		{"RF64 never finished", "RF64\xFF\xFF\xFF\xFFWAVE" + ds64(0, 0, "") + format + "data\xFF\xFF\xFF\xFF" + four, 4, -1, false, ""},
		{"RF64 without ds64", "RF64\xFF\xFF\xFF\xFFWAVE" + format + "data\xFF\xFF\xFF\xFF" + four, 4, -1, false, ""},
		{"RF64 with another big chunk", "RF64\xFF\xFF\xFF\xFFWAVE" + ds64(80, 8, "axml"+u64(6)) + format + "axml\xFF\xFF\xFF\xFFabcdef" + "data\xFF\xFF\xFF\xFF" + four, 4, 4, false, ""},
		{"RF64 that promises 6 GiB", "RF64\xFF\xFF\xFF\xFFWAVE" + ds64(6<<30, 6<<30, "") + format + "data\xFF\xFF\xFF\xFF" + four, 4, 3 << 30, true, ""},
		{"torn chunk behind the data", string(riffFile(format, riffChunk("data", four))) + "LIST" + u32(999) + "IN", 4, 4, false, ""},
		{"stream: both sizes just under 2 GiB", "RIFF\x24\xF0\xFF\x7FWAVE" + format + "data\x00\xF0\xFF\x7F" + four, 4, -1, false, ""}, // sox
		{"crash: size of the header alone", "RIFF" + u32(36) + "WAVE" + format + "data" + u32(0) + four, 4, -1, false, ""},
		{"fmt behind the data", string(riffFile(riffChunk("data", four), riffChunk("cue ", "wxyz"), format)), 4, 4, false, ""},
		{"fmt behind the data, in RF64", "RF64\xFF\xFF\xFF\xFFWAVE" + lowFirst + "data\xFF\xFF\xFF\xFF" + four + format, 4, 4, false, ""},
		{"odd data, padding forgotten", string(riffFile(format, "data"+u32(9)+four+"x", riffChunk("cue ", "wxyz"))), 4, 4, false, ""},
		{"RF64 whose 32-bit size is 0", "RF64\xFF\xFF\xFF\xFFWAVE" + lowFirst + format + "data" + u32(0) + four + riffChunk("cue ", "wxyz"), 4, 4, false, ""},
		{"RF64 that promises 2^63 bytes and as many tables", "RF64\xFF\xFF\xFF\xFFWAVE" + riffChunk("ds64", u64(1<<63)+u64(1<<63)+u64(0)+u32(0xFFFFFFFF)+"axml"+u64(1<<63)) + format + "data\xFF\xFF\xFF\xFF" + four, 4, -1, false, ""},
		{"a second data chunk", string(riffFile(format, riffChunk("data", four), riffChunk("data", four))), 4, 4, false, "second data chunk"},
		{"an empty second data chunk", string(riffFile(format, riffChunk("data", four), riffChunk("data", ""))), 4, 4, false, ""},
		{"sound that the header does not know of", "RIFF" + u32(44) + "WAVE" + format + "data" + u32(8) + four + four, 4, 4, false, "8 bytes before the file does"},
		{"the same after a pause", string(riffFile(format, riffChunk("data", four))) + strings.Repeat("\x00", 300_000) + four, 4, 4, false, "300008 bytes before"},
		{"zeros to fill a sector up", string(riffFile(format, riffChunk("data", four))) + strings.Repeat("\x00", 500), 4, 4, false, ""},
	}
	// Nobody else reads these at all, or finds the sound in them.
	alone := map[string]bool{
		"odd chunk before, padding forgotten": true, "RF64 never finished": true, "RF64 without ds64": true, "RF64 with another big chunk": true,
		"RF64 that promises 2^63 bytes and as many tables": true,
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			path := save(t, "a.wav", []byte(test.file))
			r := open(t, withoutFFmpeg(), path)
			got, err := drain(r, 3)
			if got.Frames() != test.frames || r.Info().Frames != test.promised {
				t.Errorf("%d frames, promised %d; want %d, %d", got.Frames(), r.Info().Frames, test.frames, test.promised)
			}
			for i, x := range got[0] {
				if x != float32(i+1)/32768 {
					t.Errorf("frame %d is %v", i, x)
				}
			}
			if torn := errors.Is(err, io.ErrUnexpectedEOF); torn != test.torn || !torn && err != nil {
				t.Errorf("error %v, want torn = %v", err, test.torn)
			}
			if test.torn && !strings.Contains(err.Error(), path) {
				t.Errorf("error %q does not name the file", err)
			}
			if !readByAnother(t, path, got) != alone[test.name] {
				t.Errorf("read alike by FFmpeg or sox: %v", alone[test.name])
			}
			if got := r.(Damaged).Damage(); (got == "") != (test.damage == "") || !strings.Contains(got, test.damage) {
				t.Errorf("damage %q, want %q", got, test.damage)
			}
			if _, again := r.ReadBlock(audio.NewBlock(1, 1)); again == nil || test.torn && again != err {
				t.Errorf("after the end: %v", again)
			}
		})
	}
}

// readByAnother reports whether FFmpeg or sox reads the same 16-bit sound from a file. They may refuse to.
func readByAnother(t *testing.T, path string, snd audio.Block) bool {
	t.Helper()
	for _, cmd := range [][]string{{"ffmpeg", "-v", "error", "-i", path, "-f", "s16le", "-"}, {"sox", "-V0", path, "-t", "s16", "-"}} {
		tool, err := exec.LookPath(cmd[0])
		if err != nil {
			t.Fatalf("this test needs %s: apt install ffmpeg sox", cmd[0])
		}
		if out, err := exec.Command(tool, cmd[1:]...).Output(); err == nil && bytes.Equal(out, interleaved(snd, 16)) {
			return true
		}
	}
	return false
}

func TestWAVHostileHeaders(t *testing.T) {
	data := riffChunk("data", "\x00\x00\x00\x00")
	tests := map[string]string{
		"0 channels":                string(riffFile(plainFmt(1, 0, 8000, 16, 2), data)),
		"65535 channels":            string(riffFile(plainFmt(1, 65535, 8000, 16, 2), data)),
		"65 channels":               string(riffFile(plainFmt(1, 65, 8000, 16, 2), data)),
		"rate of 0":                 string(riffFile(plainFmt(1, 1, 0, 16, 2), data)),
		"rate of 4 GHz":             string(riffFile(plainFmt(1, 1, 0xFFFFFFFF, 16, 2), data)),
		"frames of 0 bytes":         string(riffFile(plainFmt(1, 2, 8000, 16, 0), data)),
		"frames smaller than bits":  string(riffFile(plainFmt(1, 2, 8000, 24, 2), data)),
		"frames far larger":         string(riffFile(plainFmt(1, 2, 8000, 16, 32), data)),
		"0 bits":                    string(riffFile(plainFmt(1, 1, 8000, 0, 2), data)),
		"data without fmt":          string(riffFile(data)),
		"data of no length and fmt": "RIFF\xFF\xFF\xFF\xFFWAVEdata\xFF\xFF\xFF\xFF" + plainFmt(1, 1, 8000, 16, 2),
		"sound in pieces":           string(riffFile(plainFmt(1, 1, 8000, 16, 2), riffChunk("LIST", "wavl"+data))),
		"no data":                   string(riffFile(plainFmt(1, 1, 8000, 16, 2))),
		"no fmt":                    string(riffFile(riffChunk("cue ", "abcd"))),
		"fmt of 4 GiB":              "RIFF" + u32(99) + "WAVEfmt " + u32(0xFFFFFFF0) + "\x01\x00\x01\x00",
		"fmt of 4 bytes":            string(riffFile(riffChunk("fmt ", "\x01\x00\x01\x00"), data)),
		"extensible without a mask": string(riffFile(plainFmt(0xFFFE, 1, 8000, 16, 2), data)),
		"LIST past the end":         "RIFF" + u32(99) + "WAVELIST" + u32(0x7FFFFFFF) + "INFO",
		"a million chunks":          string(riffFile(strings.Repeat(riffChunk("JUNK", ""), 20_000), plainFmt(1, 1, 8000, 16, 2), data)),
		"ds64 of 4 bytes":           "RF64\xFF\xFF\xFF\xFFWAVE" + riffChunk("ds64", "abcd") + plainFmt(1, 1, 8000, 16, 2) + data,
		"only the first 12 bytes":   "RIFF" + u32(4) + "WAVE",
	}
	for name, file := range tests {
		t.Run(name, func(t *testing.T) {
			path := save(t, "a.wav", []byte(file))
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

// A file may be cut anywhere; whatever is in front of the cut is delivered or the error is clear.
func TestWAVCutAnywhere(t *testing.T) {
	whole := riffFile(riffChunk("bext", "abc"), extFmt(1, 2, 48000, 3, 24, 3), riffChunk("data", strings.Repeat("\x11\x22\x33", 40)), riffChunk("LIST", "INFO"))
	dataAt := bytes.Index(whole, []byte("data")) + 8
	for n := range len(whole) {
		path := save(t, "a.wav", whole[:n])
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

func TestWAVBlockSizeIsNotAudible(t *testing.T) {
	snd := programme(3, 5000, 24, 0.9)
	path := t.TempDir() + "/a"
	write(t, withoutFFmpeg(), path, Spec{Container: "wav", BitDepth: 24, Format: audio.Format{Rate: 44100, Layout: audio.UsualLayout(3)}}, snd)
	for _, block := range []int{1, 13, 4096, 100_000} {
		got, err := drain(open(t, withoutFFmpeg(), path), block)
		if err != nil {
			t.Fatal(err)
		}
		sameSound(t, got, snd)
	}
}

func TestWAVReadingAllocatesNothing(t *testing.T) {
	path := t.TempDir() + "/a"
	write(t, withoutFFmpeg(), path, Spec{Container: "wav", BitDepth: 24, Format: stereo(48000)}, programme(2, 200_000, 24, 0.5))
	r, buf := open(t, withoutFFmpeg(), path), audio.NewBlock(2, 1024)
	if n := testing.AllocsPerRun(100, func() {
		if _, err := r.ReadBlock(buf); err != nil {
			t.Fatal(err)
		}
	}); n != 0 {
		t.Errorf("%v allocations a block", n)
	}
}
