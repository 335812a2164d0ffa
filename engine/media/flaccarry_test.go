package media

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// flacBlocks walks the metadata of a FLAC by RFC 9639, 8.1, and returns each block with its header, without the mark
// of the last, and where the sound begins.
func flacBlocks(t testing.TB, b []byte) (blocks [][]byte, sound int) {
	t.Helper()
	for at := 4; ; {
		n := 4 + int(b[at+1])<<16 + int(b[at+2])<<8 + int(b[at+3])
		block := slices.Clone(b[at : at+n])
		last := block[0]&0x80 != 0
		block[0] &= 0x7F
		blocks = append(blocks, block)
		if at += n; last {
			return blocks, at
		}
	}
}

// flacOf puts a FLAC together.
func flacOf(blocks [][]byte, sound []byte) []byte {
	b := []byte("fLaC")
	for i, block := range blocks {
		block = slices.Clone(block)
		if i == len(blocks)-1 {
			block[0] |= 0x80
		}
		b = append(b, block...)
	}
	return append(b, sound...)
}

func flacBlockOf(kind byte, body []byte) []byte {
	return append(binary.BigEndian.AppendUint32(nil, uint32(kind)<<24|uint32(len(body))), body...)
}

// fullFLAC makes a FLAC with blocks of every kind: comments, two pictures, a cue sheet, the note of an application, and
// a kind that has no name yet; padding is in the middle.
func fullFLAC(t testing.TB, wav string, picture []byte) string {
	t.Helper()
	dir := t.TempDir()
	cue, image, path := filepath.Join(dir, "x.cue"), filepath.Join(dir, "x.jpg"), filepath.Join(dir, "source.flac")
	for name, data := range map[string][]byte{image: picture, cue: []byte("FILE \"x.wav\" WAVE\n  TRACK 01 AUDIO\n    INDEX 01 00:00:00\n  TRACK 02 AUDIO\n    INDEX 01 00:01:00\n")} {
		if err := os.WriteFile(name, data, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	run(t, "flac", "-s", "-f", "--cuesheet", cue, "-T", "ARTIST=One", "-T", "Artist=Two", "-T", "REPLAYGAIN_TRACK_GAIN=-7.00 dB", "-T", "CHAPTER001=00:00:00.000",
		"-T", "replaygain_album_peak=0.5", "-T", "METADATA_BLOCK_PICTURE=AAAA", "-T", "COMMENT=a\nb",
		"--picture", "3|image/jpeg|Front||"+image, "--picture", "4|image/jpeg|Back||"+image, "-P", "300", "-o", path, wav)
	run(t, "metaflac", "--set-tag=EMPTY=", path)
	blocks, sound := flacBlocks(t, load(t, path))
	blocks = slices.Insert(blocks, 2, flacBlockOf(2, []byte("testsome note")), flacBlockOf(1, make([]byte, 77)), flacBlockOf(99, []byte{1, 2, 3}))
	whole := flacOf(blocks, load(t, path)[sound:])
	if err := os.WriteFile(path, whole, 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// carriedBlocks are the blocks that a delivery has to carry as they are.
func carriedBlocks(t testing.TB, path string) (list [][]byte) {
	blocks, _ := flacBlocks(t, load(t, path))
	for _, b := range blocks {
		if !slices.Contains([]byte{0, 1, 3, 4}, b[0]) {
			list = append(list, b)
		}
	}
	return list
}

// Every block comes through, in order and byte for byte, from both writers; comments lose the stale ones only.
func TestFLACBlocksAreCarried(t *testing.T) {
	for name, test := range map[string]struct {
		box     *Toolbox
		bits    int
		picture int
	}{
		"FFmpeg": {withFFmpeg(t), 16, 30_000}, "native": {withoutFFmpeg(), 16, 30_000}, "24 bits": {withFFmpeg(t), 24, 0},
		"FFmpeg, more than a padding holds": {withFFmpeg(t), 16, 9 << 20}, "native, more than that": {withoutFFmpeg(), 24, 9 << 20},
	} {
		t.Run(name, func(t *testing.T) {
			snd := programme(2, 100_003, test.bits, 0.5)
			source := fullFLAC(t, writeWAV(t, snd, 44100), append(load(t, cover(t)), make([]byte, test.picture)...))
			path := filepath.Join(t.TempDir(), "x")
			spec := flacSpec(test.bits, 44100)
			spec.TagsFrom = source
			write(t, test.box, path, spec, snd)
			run(t, "flac", "-t", "-s", "--warnings-as-errors", path) // the MD5 too
			if got, want := carriedBlocks(t, path), carriedBlocks(t, source); len(want) != 5 || !slices.EqualFunc(got, want, bytes.Equal) {
				t.Errorf("%d blocks, want %d", len(got), len(want))
			}
			blocks, _ := flacBlocks(t, load(t, path))
			var kinds []int
			for _, b := range blocks {
				kinds = append(kinds, int(b[0]))
			}
			if !slices.Equal(kinds, []int{0, 3, 2, 99, 5, 4, 6, 6, 1}) {
				t.Errorf("kinds %v", kinds)
			}
			vendor, got := entries(t, path)
			want := []string{"ARTIST=One", "Artist=Two", "CHAPTER001=00:00:00.000", "METADATA_BLOCK_PICTURE=AAAA", "COMMENT=a\nb", "EMPTY="}
			if vendor != "evenshelf" || !slices.Equal(got, want) {
				t.Errorf("%s, %q", vendor, got)
			}
			back, _ := decode(t, test.box, path)
			sameSound(t, back, snd)
		})
	}
}

// So they do from a FLAC in Ogg.
func TestOggFLACBlocksAreCarried(t *testing.T) {
	snd, dir := programme(2, 100_003, 24, 0.5), t.TempDir()
	source, path, wav := filepath.Join(dir, "source.oga"), filepath.Join(dir, "x"), writeWAV(t, snd, 44100)
	image := filepath.Join(dir, "big.jpg")
	if err := os.WriteFile(image, append(load(t, cover(t)), make([]byte, 1<<20)...), 0o644); err != nil {
		t.Fatal(err)
	}
	run(t, "flac", "-s", "--ogg", "-T", "ARTIST=One", "-T", "Artist=Two", "-T", "REPLAYGAIN_TRACK_GAIN=-7.00 dB", "--picture", "4|image/jpeg|Back||"+image, "-o", source, wav)
	plain := filepath.Join(dir, "plain.flac")
	run(t, "flac", "-s", "--picture", "4|image/jpeg|Back||"+image, "-o", plain, wav)
	level(t, withFFmpeg(t), source, path)
	run(t, "flac", "-t", "-s", "--warnings-as-errors", path)
	if _, got := entries(t, path); !slices.Equal(got, []string{"ARTIST=One", "Artist=Two"}) {
		t.Errorf("%q", got)
	}
	if got, want := carriedBlocks(t, path), carriedBlocks(t, plain); len(want) != 1 || !slices.EqualFunc(got, want, bytes.Equal) {
		t.Errorf("%d blocks, want %d", len(got), len(want))
	}
}

var seekPoint = regexp.MustCompile(`point \d+: sample_number=(\d+), stream_offset=(\d+), frame_samples=(\d+)`)

// The seek table points at frames of the new file, about every ten seconds, also where its bit rate jumps. The reference
// tool lists it; it and FFmpeg seek by it to the right sample.
func TestFLACSeekTable(t *testing.T) {
	t.Parallel()
	const rate, seconds = 8000, 307
	snd := programme(2, rate*seconds+123, 16, 0.7)
	for c := range snd {
		clear(snd[c][20*rate : 95*rate])
		for i := range 60 * rate { // and half a minute with little in it
			snd[c][150*rate+i] = float32(i%64) / 32768
		}
	}
	wav := writeWAV(t, snd, rate)
	source := filepath.Join(t.TempDir(), "source.flac")
	run(t, "flac", "-s", "--no-seektable", "-o", source, wav)
	for name, box := range map[string]*Toolbox{"FFmpeg": withFFmpeg(t), "native": withoutFFmpeg()} {
		spec := flacSpec(16, rate)
		spec.TagsFrom = source
		path := filepath.Join(t.TempDir(), name+".flac")
		write(t, box, path, spec, snd)
		run(t, "flac", "-t", "-s", path)
		listed := seekPoint.FindAllStringSubmatch(string(run(t, "metaflac", "--list", "--block-type=SEEKTABLE", path)), -1)
		b := load(t, path)
		_, sound := flacBlocks(t, b)
		before := 0
		for i, m := range listed {
			sample, _ := strconv.Atoi(m[1])
			offset, _ := strconv.Atoi(m[2])
			if b[sound+offset] != 0xFF || b[sound+offset+1] != 0xF8 || sample-before > 12*rate || (i > 0) != (sample > before) {
				t.Errorf("%s: point %d at sample %d, after %d", name, i, sample, before)
			}
			before = sample
		}
		if len(listed) < 29 || before < (seconds-13)*rate {
			t.Errorf("%s: %d points, the last at %d", name, len(listed), before)
		}
		for _, at := range []int{0, 9_999, 19*rate + 7, 20 * rate, 94*rate + 1, 95 * rate, 123_456, 151 * rate, 290*rate + 11, 306 * rate} {
			got := run(t, "flac", "-s", "-d", "-c", "--force-raw-format", "--endian=little", "--sign=signed", fmt.Sprint("--skip=", at), fmt.Sprint("--until=", at+1000), path)
			if want := interleaved(snd.Cut(make(audio.Block, 2), at, at+1000), 16); !bytes.Equal(got, want) {
				t.Errorf("%s: flac seeks to something else than %d", name, at)
			}
			got = run(t, "ffmpeg", "-v", "error", "-ss", fmt.Sprintf("%.6f", float64(at)/rate), "-i", path, "-frames:a", "1", "-f", "s16le", "-")
			if want := interleaved(snd.Cut(make(audio.Block, 2), at, at+40), 16); !bytes.HasPrefix(got, want) {
				t.Errorf("%s: FFmpeg seeks to something else than %d", name, at)
			}
		}
	}
}

// A FLAC whose metadata is odd is delivered with what can be understood of it.
func TestOddFLACMetadata(t *testing.T) {
	snd := programme(2, 20_000, 16, 0.5)
	plain := filepath.Join(t.TempDir(), "plain.flac")
	run(t, "flac", "-s", "-o", plain, writeWAV(t, snd, 44100))
	blocks, at := flacBlocks(t, load(t, plain))
	sound := load(t, plain)[at:]
	comment := func(entries ...string) []byte {
		b := append([]byte("\x01\x00\x00\x00v"), u32(int64(len(entries)))...)
		for _, e := range entries {
			b = append(append(b, u32(int64(len(e)))...), e...)
		}
		return flacBlockOf(4, b)
	}
	cut := comment("TITLE=T", "ARTIST=Somebody")
	cut = flacBlockOf(4, cut[4:len(cut)-3])
	for name, test := range map[string]struct {
		blocks [][]byte
		want   []string
	}{
		"no comments":      {blocks[:1], nil},
		"damaged comments": {[][]byte{blocks[0], cut}, []string{"TITLE=T"}},
		"no comment bytes": {[][]byte{blocks[0], flacBlockOf(4, nil)}, nil},
		"names":            {[][]byte{blocks[0], comment("no name", "=value", "Ä=ö", "A=\xff")}, []string{"no name", "=value", "Ä=ö", "A=\xff"}},
		"a mask":           {[][]byte{blocks[0], comment("waveformatextensible_channel_mask=0x3", "A=B")}, []string{"waveformatextensible_channel_mask=0x3", "A=B"}},
	} {
		for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
			source, path := save(t, "odd.flac", flacOf(test.blocks, sound)), filepath.Join(t.TempDir(), "x")
			level(t, box, source, path)
			run(t, "flac", "-t", "-s", path)
			// The reference library refuses odd names, so the bytes are looked for.
			b := load(t, path)
			if want := comment(test.want...)[4+5:]; !bytes.Contains(b, append([]byte("evenshelf"), want...)) {
				t.Errorf("%s: %q is missing", name, want)
			}
		}
	}
}

// A loudspeaker mask stays as it is where the layout does, and is written anew, once, where it does not.
func TestFLACMask(t *testing.T) {
	snd := programme(2, 9_000, 16, 0.5)
	dir := t.TempDir()
	source, path := filepath.Join(dir, "source.flac"), filepath.Join(dir, "x")
	run(t, "flac", "-s", "-T", "TITLE=T", "-o", source, writeWAV(t, snd, 44100))
	run(t, "metaflac", "--set-tag=WaveFormatExtensible_Channel_Mask=0x0600", source)
	for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
		level(t, box, source, path)
		if _, got := entries(t, path); !slices.Equal(got, []string{"TITLE=T", "WaveFormatExtensible_Channel_Mask=0x0600"}) {
			t.Errorf("%q", got)
		}
		if out, _ := exec.Command("metaflac", "--list", path).CombinedOutput(); strings.Count(string(out), "type: 1 (PADDING)") != 1 {
			t.Errorf("%s", out)
		}
		spec := flacSpec(16, 44100)
		spec.TagsFrom, spec.Format.Layout.Mask = source, 0x30
		write(t, box, path, spec, snd)
		if _, got := entries(t, path); !slices.Equal(got, []string{"TITLE=T", "WAVEFORMATEXTENSIBLE_CHANNEL_MASK=0x0030"}) {
			t.Errorf("%q", got)
		}
	}
}
