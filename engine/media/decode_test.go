package media

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// speech returns a real recording: 16 kHz mono speech from Debian's pocketsphinx-testdata.
func speech(t testing.TB) audio.Block {
	t.Helper()
	raw, err := os.ReadFile("/usr/share/pocketsphinx/test/data/goforward.raw")
	if err != nil {
		t.Fatal("this test needs a real recording: apt install pocketsphinx-testdata")
	}
	b := audio.NewBlock(1, len(raw)/2)
	unpackS16(b, raw, b.Frames())
	return b
}

// music returns the path of a real MP3 from Debian's asc-music.
func music(t testing.TB) string {
	t.Helper()
	path := "/usr/share/games/asc/music/machine_wars.mp3"
	if _, err := os.Stat(path); err != nil {
		t.Fatal("this test needs a real recording: apt install asc-music")
	}
	return path
}

// writeWAV makes a WAV of a block without any of the package's writers.
func writeWAV(t testing.TB, snd audio.Block, rate int) string {
	t.Helper()
	return save(t, "source.wav", riffFile(plainFmt(1, len(snd), rate, 16, 2), riffChunk("data", string(interleaved(snd, 16)))))
}

// Limits for two decoders of one MP3 (design: both decoders of one format must agree).
const (
	tolPeak = 0.05 // dB
	tolRMS  = 0.01 // dB
)

// The length of a LAME-made MP3 is that of its source, to the frame, with both decoders, and the sound
// starts at the same frame: the encoder's and decoder's delays are taken off.
func TestMP3DecodersAgree(t *testing.T) {
	loudMusic := programme(2, 50_000, 16, 0.6)
	for name, test := range map[string]struct {
		snd  audio.Block
		rate int
		args []string
	}{
		"speech 16 kHz mono, CBR (MPEG-2)": {speech(t), 16000, []string{"-b", "64"}},
		"tones 44.1 kHz stereo, CBR":       {loudMusic, 44100, []string{"-b", "256"}},
		"tones 48 kHz stereo, VBR":         {loudMusic, 48000, []string{"-V", "2"}},
		"tones 22.05 kHz stereo (MPEG-2)":  {loudMusic, 22050, []string{"-b", "128"}},
		"tones 44.1 kHz mono":              {loudMusic[:1], 44100, []string{"-b", "128"}},
	} {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "a.mp3")
			run(t, "lame", append([]string{"--quiet"}, append(test.args, writeWAV(t, test.snd, test.rate), path)...)...)
			a, infoA := decode(t, withFFmpeg(t), path)
			b, infoB := decode(t, withoutFFmpeg(), path)
			want := test.snd.Frames()
			if a.Frames() != want || b.Frames() != want || infoA.Frames != int64(want) || infoB.Frames != int64(want) {
				t.Fatalf("frames: %d and %d, promised %d and %d, want %d", a.Frames(), b.Frames(), infoA.Frames, infoB.Frames, want)
			}
			if infoA.Format != infoB.Format || !strings.HasSuffix(infoA.Decoder, " mp3float") || math.Abs(float64(infoA.BitRate)/float64(infoB.BitRate)-1) > 0.02 {
				t.Errorf("%+v\n%+v", infoA, infoB)
			}
			peakA, rmsA := peakRMS(a)
			peakB, rmsB := peakRMS(b)
			if math.Abs(peakA-peakB) > tolPeak || math.Abs(rmsA-rmsB) > tolRMS {
				t.Errorf("peak %.3f and %.3f, RMS %.4f and %.4f dBFS", peakA, peakB, rmsA, rmsB)
			}
			if d := apart(a, b); d > -55 {
				t.Errorf("the decoders differ by %.1f dB", d)
			}
			if d := apart(test.snd, a); d > -6 {
				t.Errorf("decoded and source differ by %.1f dB: they are not aligned", d)
			}
		})
	}
}

// Real MP3s of 2004, made by who knows what: 22.05 kHz with intensity stereo and no note about delays.
// FFmpeg must agree with LAME's decoder, which takes 529 frames of decoder delay off. The fallback cannot
// decode them and says so.
func TestMP3RealRecording(t *testing.T) {
	path := save(t, "part.mp3", load(t, music(t))[:300_000])
	a, info := decodeTorn(t, withFFmpeg(t), path)
	raw := filepath.Join(t.TempDir(), "lame.wav")
	run(t, "lame", "--quiet", "--decode", path, raw)
	b, _ := decode(t, withoutFFmpeg(), raw)
	n := b.Frames()
	if info.Format != stereo(22050) || n < 20*22050 || a.Frames() < n+decoderDelay || a.Frames() > n+decoderDelay+576 {
		t.Fatalf("%+v: %d frames, LAME has %d", info, a.Frames(), n)
	}
	const quiet = 150_000 // frames before the music is loud enough for LAME's 16 bits to clip
	for c := range a {
		a[c], b[c] = a[c][decoderDelay:][:quiet], b[c][:quiet]
	}
	if d := apart(a, b); d > -70 {
		t.Errorf("FFmpeg and LAME differ by %.1f dB", d)
	}
	_, err := withoutFFmpeg().Open(context.Background(), path)
	if !errors.Is(err, ErrUnsupported) || !strings.Contains(err.Error(), "intensity stereo") {
		t.Errorf("without FFmpeg: %v", err)
	}
}

func abs(n int) int { return max(n, -n) }

// decodeTorn is decode for a file known to be cut off: a torn end is accepted, nothing else.
func decodeTorn(t *testing.T, box *Toolbox, path string) (audio.Block, Info) {
	t.Helper()
	r := open(t, box, path)
	all, err := drain(r, audio.BlockFrames)
	if err != nil && !errors.Is(err, io.ErrUnexpectedEOF) {
		t.Fatal(err)
	}
	return all, r.Info()
}

// A lossy decoder may pass full scale, and the overs are kept, at every sampling rate of the format. Who
// reads what the fallback made of them is told that it clips.
func TestOversSurviveDecoding(t *testing.T) {
	snd := audio.NewBlock(2, 44100)
	for c := range snd {
		for i := range snd[c] {
			snd[c][i] = 0.99
			if (i/50)%2 == 1 {
				snd[c][i] = -0.99
			}
		}
	}
	for _, rate := range []int{8000, 11025, 12000, 16000, 22050, 24000, 32000, 44100, 48000} {
		path := filepath.Join(t.TempDir(), "a.mp3")
		bits := "192"
		if rate < 16000 {
			bits = "64" // the most there is
		} else if rate < 32000 {
			bits = "128"
		}
		run(t, "lame", "--quiet", "-b", bits, "--resample", fmt.Sprint(float64(rate)/1000), "--scale", "1", writeWAV(t, snd, rate), path)
		got, info := decode(t, withFFmpeg(t), path)
		if peak, _ := peakRMS(got); peak < 0.2 || info.Format.Rate != rate {
			t.Errorf("%d Hz: peak %.2f dBFS: a square wave through a lossy codec overshoots by more than that", info.Format.Rate, peak)
		}
		clipped, err := withoutFFmpeg().Open(context.Background(), path)
		if err != nil {
			continue // go-mp3 does not know the lowest rates, nor intensity stereo
		}
		all, err := drain(clipped, 4096)
		clipped.Close()
		if peak, _ := peakRMS(all); err != nil || peak > 0 || clipped.Info().Decoder != "go-mp3 0.3.4, 16 bits, clips at full scale" {
			t.Errorf("%d Hz: %q, peak %.2f dBFS, %v", rate, clipped.Info().Decoder, peak, err)
		}
	}
}

// Formats that only FFmpeg knows: made by FFmpeg's own command, recognised under a wrong name, of the
// right length where the container keeps one.
func TestOtherFormats(t *testing.T) {
	source := writeWAV(t, programme(2, 40_000, 16, 0.5), 48000)
	for _, test := range []struct {
		muxer, name string
		args        []string
		exact       bool
	}{
		{"ogg", "ogg vorbis", []string{"-c:a", "libvorbis"}, true},
		{"ogg", "opus", []string{"-c:a", "libopus"}, true},
		{"ogg", "ogg flac", []string{"-c:a", "flac"}, true},
		{"ipod", "m4a alac", []string{"-c:a", "alac"}, true},
		{"ipod", "m4a aac", []string{"-c:a", "aac", "-movie_timescale", "48000"}, true},
		{"adts", "aac", []string{"-c:a", "aac"}, false},
		{"matroska", "matroska vorbis", []string{"-c:a", "libvorbis"}, false},
		{"webm", "webm opus", []string{"-c:a", "libopus"}, false},
		{"aiff", "aiff", []string{"-c:a", "pcm_mulaw"}, true},
		{"caf", "caf", nil, true},
		{"wv", "wv wavpack", nil, true},
		{"ac3", "ac3", nil, false},
		{"asf", "asf wmav2", []string{"-c:a", "wmav2"}, false},
		{"mpegts", "mpegts mp2", []string{"-c:a", "mp2"}, false},
		{"mp2", "mp3 mp2", []string{"-c:a", "mp2"}, false},
		{"wav", "wav adpcm_ms", []string{"-c:a", "adpcm_ms"}, false},
		{"wav", "wav", []string{"-c:a", "pcm_alaw"}, true},
	} {
		t.Run(test.name, func(t *testing.T) {
			t.Parallel()
			path := filepath.Join(t.TempDir(), "wrong.txt")
			run(t, "ffmpeg", append(append([]string{"-v", "error", "-i", source}, test.args...), "-f", test.muxer, path)...)
			got, info := decode(t, withFFmpeg(t), path)
			if info.FormatName() != test.name || info.Format != stereo(48000) || info.Video {
				t.Errorf("%q, %+v", info.FormatName(), info)
			}
			if n := got.Frames(); test.exact && (n != 40_000 || info.Frames != 40_000) || n < 37_000 || n > 44_000 {
				t.Errorf("%d frames, promised %d, want 40000", n, info.Frames)
			}
			_, err := withoutFFmpeg().Open(context.Background(), path)
			if !errors.Is(err, ErrUnsupported) || !strings.Contains(err.Error(), "install the Debian package ffmpeg") || !strings.Contains(err.Error(), path) {
				t.Errorf("without FFmpeg: %v", err)
			}
		})
	}
}

// cover returns the path of a small picture.
func cover(t testing.TB) string {
	path := filepath.Join(t.TempDir(), "cover.jpg")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "color=red:s=64x64", "-frames:v", "1", path)
	return path
}

// The sound of a film is found, and a film is said to be one; cover art does not make a film.
func TestFilmSound(t *testing.T) {
	dir, source := t.TempDir(), writeWAV(t, programme(2, 40_000, 16, 0.5), 48000)
	film := filepath.Join(dir, "film.mp4")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "color=s=64x64:d=0.8", "-i", source, "-c:a", "aac", film)
	got, info := decode(t, withFFmpeg(t), film)
	if !info.Video || info.FormatName() != "mp4 aac" || abs(got.Frames()-40_000) > 48 { // ±1 ms: the file counts in ms
		t.Errorf("%d frames, %+v", got.Frames(), info)
	}
	song := filepath.Join(dir, "song.m4a")
	run(t, "ffmpeg", "-v", "error", "-i", source, "-i", cover(t), "-c:v", "mjpeg", "-disposition:v", "attached_pic", "-c:a", "aac", song)
	if _, info := decode(t, withFFmpeg(t), song); info.Video {
		t.Error("cover art was taken for a film")
	}
}

// Two Ogg files in one, as stream recorders make them: the second counts from 0 again, so the length
// Ogg keeps is that of the second alone. All of both is delivered.
func TestChainedOgg(t *testing.T) {
	dir, both := t.TempDir(), []byte(nil)
	for i, frames := range []int{150_000, 60_000} {
		path := filepath.Join(dir, fmt.Sprint(i, ".ogg"))
		run(t, "ffmpeg", "-v", "error", "-i", writeWAV(t, programme(2, frames, 16, 0.5), 44100), "-c:a", "libvorbis", path)
		both = append(both, load(t, path)...)
	}
	r := open(t, withFFmpeg(t), save(t, "chain.ogg", both))
	all, err := drain(r, 4096)
	if err != nil || abs(all.Frames()-210_000) > 4096 {
		t.Errorf("%d frames of 210000, promised %d: %v", all.Frames(), r.Info().Frames, err)
	}
}

// FLAC with an ID3 tag in front is against the format's rules and common.
func TestFLACBehindID3(t *testing.T) {
	snd := programme(2, 5000, 16, 0.5)
	path := filepath.Join(t.TempDir(), "a.flac")
	run(t, "flac", "-s", "-o", path, writeWAV(t, snd, 44100))
	tagged := append([]byte("ID3\x03\x00\x00\x00\x00\x01\x00"), make([]byte, 128)...)
	path = save(t, "tagged.flac", append(tagged, load(t, path)...))
	for _, reader := range flacDecoders(t) {
		got, _ := drained(t, reader(path))
		sameSound(t, got, snd)
	}
}

// Positions that are not FLAC's usual ones are in a comment (RFC 9639); both decoders and the reference
// tool understand it.
func TestFLACChannelMask(t *testing.T) {
	side := audio.Layout{Channels: 6, Mask: 0x60F}
	snd := programme(6, 5000, 16, 0.5)
	spec := Spec{Container: "flac", Codec: "flac", BitDepth: 16, Format: audio.Format{Rate: 48000, Layout: side}}
	for _, writer := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
		path := filepath.Join(t.TempDir(), "a.flac")
		write(t, writer, path, spec, snd)
		if tag := string(run(t, "metaflac", "--show-tag=WAVEFORMATEXTENSIBLE_CHANNEL_MASK", path)); !strings.Contains(strings.ToUpper(tag), "60F") {
			t.Errorf("tag %q", tag)
		}
		for _, reader := range flacDecoders(t) {
			got, info := drained(t, reader(path))
			sameSound(t, got, snd)
			if info.Format.Layout != side {
				t.Errorf("%s: %+v", info.Decoder, info.Format.Layout)
			}
		}
	}
}

func TestUnknownLengthFLAC(t *testing.T) {
	snd := programme(1, 5000, 16, 0.5)
	path := filepath.Join(t.TempDir(), "a.flac")
	run(t, "flac", "-s", "-o", path, writeWAV(t, snd, 44100))
	b := load(t, path)
	// STREAMINFO's 36 bits of total samples: the low half of byte 21 and bytes 22 to 25 of the file.
	b[21] &= 0xF0
	binary.BigEndian.PutUint32(b[22:], 0)
	path = save(t, "b.flac", b)
	for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
		got, info := decode(t, box, path)
		sameSound(t, got, snd)
		if info.Frames != -1 {
			t.Errorf("%s promises %d frames", info.Decoder, info.Frames)
		}
	}
	if !bytes.HasPrefix(b, []byte("fLaC")) {
		t.Error("not FLAC any more")
	}
}
