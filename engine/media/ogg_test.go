package media

import (
	"context"
	"encoding/binary"
	"errors"
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

// level writes a levelled copy of a file, as far as this package goes: its sound through SpecFor and Create.
func level(t testing.TB, box *Toolbox, source, path string) Spec {
	t.Helper()
	snd, info := decode(t, box, source)
	spec := box.SpecFor(info, Wish{})
	spec.TagsFrom = source
	write(t, box, path, spec, snd)
	return spec
}

// noise is band-limited, so that lossy codecs keep it, and sharp in time.
func noise(channels, frames int) audio.Block {
	b, rng := audio.NewBlock(channels, frames), rand.New(rand.NewPCG(5, 6))
	for c := range b {
		low := 0.0
		for i := range b[c] {
			low += 0.3 * (2*rng.Float64() - 1 - low)
			b[c][i] = float32(math.Round(0.5*low*32767) / 32768)
		}
	}
	return b
}

// oggSource makes an Ogg file with the codec's own encoder.
func oggSource(t testing.TB, codec, wav string, args ...string) string {
	t.Helper()
	const bitrate = 400 // kbit/s
	path := filepath.Join(t.TempDir(), "source."+codec)
	if codec == "opus" {
		run(t, "opusenc", append(append([]string{"--quiet", "--bitrate", fmt.Sprint(bitrate)}, args...), wav, path)...)
	} else {
		run(t, "oggenc", append(append([]string{"-Q", "-q", "8"}, args...), "-o", path, wav)...)
	}
	return path
}

// byItsOwn decodes an Ogg file with the codec's own library (opus-tools; sox with libvorbis) and returns it as WAV. sox
// leaves channels in the order of the stream, which Vorbis I, 4.3.9, gives: front left, centre, right, rear left, right,
// LFE.
func byItsOwn(t testing.TB, codec, path string, channels int) string {
	t.Helper()
	wav := filepath.Join(t.TempDir(), "decoded.wav")
	if codec == "opus" {
		run(t, "opusdec", "--quiet", "--no-dither", "--rate", "48000", path, wav)
		return wav
	}
	args := []string{"-D", "-t", "ogg", path, wav}
	if channels == 6 {
		args = append(args, "remix", "1", "3", "2", "6", "4", "5")
	}
	run(t, "sox", args...)
	return wav
}

// lags says, by numpy, of each pair of WAVs how many frames the second has, how far its channels are behind those of the
// first, in frames, and whether they are alike. Of an LFE, channel 3 of 6, nothing is said: Opus keeps too little of it.
func lags(t testing.TB, pairs []string) string {
	t.Helper()
	return string(run(t, "/usr/bin/python3", append([]string{"-c", `
import sys, subprocess, numpy as np
def load(p):
    n = int(subprocess.check_output(['soxi', '-c', p]))
    return np.frombuffer(subprocess.check_output(['sox', p, '-t', 'f32', '-']), np.float32).reshape(-1, n).T.astype(float)
for p, q in zip(sys.argv[1::2], sys.argv[2::2]):
    a, b = load(p), load(q)
    print(b.shape[1], end=': ')
    n = 1 << (a.shape[1] + b.shape[1]).bit_length()
    for i, (x, y) in enumerate(zip(a, b)):
        if len(a) == 6 and i == 3: continue
        c = np.fft.irfft(np.conj(np.fft.rfft(x, n)) * np.fft.rfft(y, n))
        k = int(np.argmax(c)); k = k - n if k > n // 2 else k
        print(k, 'alike' if c.max() > 0.6 * np.sqrt((x*x).sum() * (y*y).sum()) else 'unlike', end=' ')
    print()
`}, pairs...)...))
}

// A copy is as long as its source and lies on it, to the frame, by the word of the codecs' own decoders.
func TestOggLengthIsExact(t *testing.T) {
	t.Parallel()
	box := withFFmpeg(t)
	var pairs []string
	var want strings.Builder
	for _, test := range []struct{ channels, frames int }{
		{1, 997}, {1, 131_071}, {2, 960}, {2, 2881}, {2, 61_337}, {6, 2879}, {6, 70_001},
	} {
		for codec, rate := range map[string]int{"vorbis": 44100, "opus": 48000} {
			name := fmt.Sprintf("%s, %d × %d", codec, test.channels, test.frames)
			wav := writeWAV(t, noise(test.channels, test.frames), rate)
			source, path := oggSource(t, codec, wav), filepath.Join(t.TempDir(), "copy")
			snd, _ := decode(t, box, source)
			level(t, box, source, path)
			got, info := decode(t, box, path)
			if snd.Frames() != test.frames || got.Frames() != test.frames || info.Frames != int64(test.frames) {
				t.Errorf("%s: source %d, copy %d, promised %d", name, snd.Frames(), got.Frames(), info.Frames)
			}
			pairs = append(pairs, wav, byItsOwn(t, codec, path, test.channels))
			want.WriteString(fmt.Sprint(test.frames, ": ", strings.Repeat("0 alike ", min(test.channels, 5)), "\n"))
		}
	}
	if got := lags(t, pairs); got != want.String() {
		t.Errorf("lags\n%s\nof %q", got, pairs)
	}
}

// Each loudspeaker keeps its sound: the copies' channels are told apart by the correlation with the source's.
func TestOggChannelOrder(t *testing.T) {
	box := withFFmpeg(t)
	for _, codec := range []string{"vorbis", "opus"} {
		snd := audio.NewBlock(6, 96_000)
		for c := range snd {
			for i := range snd[c] {
				snd[c][i] = float32(math.Round(8000*math.Sin(2*math.Pi*float64(i)*float64(50+c*10)/48000)) / 32768)
			}
		}
		source, path := oggSource(t, codec, writeWAV(t, snd, 48000)), filepath.Join(t.TempDir(), "copy")
		level(t, box, source, path)
		outside, _ := decode(t, box, byItsOwn(t, codec, path, 6))
		for c := range snd {
			best, power := -1, 0.0
			for tone := range 6 {
				var re, im float64
				for i, x := range outside[c] {
					s, co := math.Sincos(2 * math.Pi * float64(i) * float64(50+tone*10) / 48000)
					re, im = re+float64(x)*co, im+float64(x)*s
				}
				if p := re*re + im*im; p > power {
					best, power = tone, p
				}
			}
			if best != c {
				t.Errorf("%s: loudspeaker %d has the sound of %d", codec, c, best)
			}
		}
	}
}

// The output gain of an Opus header is part of its sound: it is measured with it, and the copy's header has none, or
// it would be applied twice.
func TestOpusOutputGain(t *testing.T) {
	box := withFFmpeg(t)
	source := oggSource(t, "opus", writeWAV(t, noise(2, 96_000), 48000))
	_, plain := peakRMS(first(decode(t, box, source)))
	b := load(t, source)
	binary.LittleEndian.PutUint16(b[28+16:], uint16(0x10000-6*256)) // RFC 7845, 5.1: Q7.8 at byte 16
	quiet := filepath.Join(t.TempDir(), "quiet.opus")
	if err := os.WriteFile(quiet, sealed(b), 0o644); err != nil {
		t.Fatal(err)
	}
	if out := string(run(t, "opusinfo", quiet)); !strings.Contains(out, "Playback gain: -6 dB") {
		t.Fatal(out)
	}
	if _, rms := peakRMS(first(decode(t, box, quiet))); math.Abs(plain-6-rms) > 0.01 {
		t.Errorf("with −6 dB it is %.2f dB, without %.2f dB", rms, plain)
	}
	path := filepath.Join(t.TempDir(), "copy.opus")
	level(t, box, quiet, path)
	if out := string(run(t, "opusinfo", path)); !strings.Contains(out, "Playback gain: 0 dB") {
		t.Error(out)
	}
	if _, rms := peakRMS(first(decode(t, box, byItsOwn(t, "opus", path, 2)))); math.Abs(plain-6-rms) > 0.1 {
		t.Errorf("the copy is %.2f dB, its source without the gain %.2f dB", rms, plain)
	}
}

func first(b audio.Block, _ Info) audio.Block { return b }

// sealed gives the first page of an Ogg file its checksum, worked out bit by bit (RFC 3533, 6).
func sealed(b []byte) []byte {
	size := 27 + int(b[26])
	for _, n := range b[27:size] {
		size += int(n)
	}
	binary.LittleEndian.PutUint32(b[22:], 0)
	crc := uint32(0)
	for _, x := range b[:size] {
		for bit := 7; bit >= 0; bit-- {
			high := crc>>31 ^ uint32(x>>bit&1)
			crc = crc<<1 ^ high*0x04C11DB7
		}
	}
	binary.LittleEndian.PutUint32(b[22:], crc)
	return b
}

// What is in Ogg besides one stream of Vorbis or Opus.
func TestOtherOgg(t *testing.T) {
	t.Parallel()
	box, dir := withFFmpeg(t), t.TempDir()
	wav := writeWAV(t, noise(2, 50_000), 48000)
	mono := writeWAV(t, noise(1, 32_000), 16000)
	for name, test := range map[string]struct {
		args   []string
		format string // of the copy
		note   string
	}{
		"flac.ogg":  {[]string{"-i", wav, "-c:a", "flac"}, "flac", "ogg flac is not written here"},
		"speex.ogg": {[]string{"-i", mono, "-c:a", "libspeex"}, "m4a aac", "ogg speex is not written here"},
		"two.ogg":   {[]string{"-i", wav, "-i", wav, "-map", "0", "-map", "1", "-c:a", "libvorbis"}, "matroska vorbis", "several tracks in ogg are delivered as Matroska"},
		"mixed.ogg": {[]string{"-i", wav, "-i", wav, "-map", "0", "-map", "1", "-c:a:0", "libopus", "-c:a:1", "libvorbis"}, "matroska opus", "several tracks"},
		"film.ogg":  {[]string{"-f", "lavfi", "-i", "color=s=64x64:d=1", "-i", wav, "-c:v", "libtheora", "-c:a", "libvorbis"}, "matroska vorbis", "films in ogg are delivered as Matroska"},
	} {
		t.Run(name, func(t *testing.T) {
			source, path := filepath.Join(dir, name), filepath.Join(dir, "copy-"+name)
			run(t, "ffmpeg", append(append([]string{"-v", "error"}, test.args...), "-metadata:s:a:0", "TITLE=T", source)...)
			spec := level(t, box, source, path)
			if _, info := decode(t, box, path); info.FormatName() != test.format || !strings.HasPrefix(spec.Note, test.note) {
				t.Errorf("%s, %s", info.FormatName(), spec.Note)
			}
			if said := run(t, "ffprobe", "-v", "error", "-show_entries", "format_tags:stream_tags", "-of", "compact", path); !strings.Contains(strings.ToUpper(string(said)), "TITLE=T") {
				t.Errorf("%s", said)
			}
			if err := box.Retag(context.Background(), source, path, someGains); !errors.Is(err, ErrUnsupported) || !strings.HasPrefix(err.Error(), source) {
				t.Errorf("gain tags: %v", err)
			}
		})
	}
}

// Links of a chain that are alike are one recording, also where the last is longer than what FFmpeg looks at to find a
// length. What FFmpeg would decode wrongly is refused: another codec, and another output gain, which it does not follow.
func TestChainsThatAreAlike(t *testing.T) {
	box, dir := withFFmpeg(t), t.TempDir()
	wav := writeWAV(t, noise(2, 96_000), 48000)
	opus := load(t, oggSource(t, "opus", wav, "--serial", "1", "--comment", "TITLE=A"))
	more := load(t, oggSource(t, "opus", wav, "--serial", "2", "--comment", "TITLE=B"))
	quiet := append([]byte{}, more...)
	binary.LittleEndian.PutUint16(quiet[28+16:], uint16(0x10000-6*256))
	vorbis := load(t, oggSource(t, "vorbis", wav))
	path := filepath.Join(dir, "x")
	chain := func(b []byte) error {
		if err := os.WriteFile(path, append(append([]byte{}, opus...), b...), 0o644); err != nil {
			t.Fatal(err)
		}
		r, err := box.Open(context.Background(), path)
		if err == nil {
			r.Close()
		}
		return err
	}
	if err := chain(sealed(quiet)); !errors.Is(err, ErrUnsupported) || !strings.Contains(err.Error(), "goes on as -6.00 dB") {
		t.Errorf("another gain: %v", err)
	}
	if err := chain(vorbis); !errors.Is(err, ErrUnsupported) || !strings.Contains(err.Error(), "goes on as vorbis") {
		t.Errorf("another codec: %v", err)
	}
	if err := chain(more); err != nil {
		t.Error(err)
	}
	if snd, _ := decode(t, box, path); snd.Frames() != 2*96_000 {
		t.Errorf("%d frames", snd.Frames())
	}
	level(t, box, path, filepath.Join(dir, "copy"))
	if _, tags := entries(t, filepath.Join(dir, "copy")); !slices.Contains(tags, "TITLE=A") {
		t.Errorf("tags %q", tags)
	}
}
