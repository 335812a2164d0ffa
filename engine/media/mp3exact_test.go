package media

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// mp3Rates are the sampling rates of MPEG-1, MPEG-2 and MPEG-2.5 (ISO/IEC 11172-3, 13818-3; the last is common
// practice).
var mp3Rates = []int{8000, 11025, 12000, 16000, 22050, 24000, 32000, 44100, 48000}

// Whoever encoded it, an MP3 that says how much of it is sound is read to the frame, and so is one written here: it has
// the length of what it was made from, and every sound is where it was.
func TestMP3IsExact(t *testing.T) {
	for i, rate := range mp3Rates {
		for channels := 1; channels <= 2; channels++ {
			if channels != 1+i%2 && rate != 44100 {
				continue
			}
			t.Run(fmt.Sprintf("%d Hz, %d", rate, channels), func(t *testing.T) {
				t.Parallel()
				const frames = 20_011
				snd, dir := surf(channels, frames), t.TempDir()
				wav, path := writeWAV(t, snd, rate), filepath.Join(dir, "a.mp3")
				spec := Spec{Container: "mp3", Codec: "mp3", Format: audio.Format{Rate: rate, Layout: audio.UsualLayout(channels)}}
				lame := func(args ...string) {
					args = append([]string{"--quiet", "--resample", fmt.Sprint(float64(rate) / 1000)}, args...)
					run(t, "lame", append(args, wav, path)...)
				}
				ffmpeg := func(args ...string) {
					run(t, "ffmpeg", slices.Concat([]string{"-v", "error", "-y", "-i", wav}, args, []string{path})...)
				}
				few := fmt.Sprint(min(rate/200, 96)) // kbit/s; in frames of fewer bytes LAME finds no room for its note
				for name, make := range map[string]func(){
					"LAME, constant":   func() { lame("-b", few) },
					"LAME, variable":   func() { lame("-V", "2") },
					"LAME, average":    func() { lame("--abr", few) },
					"LAME, checked":    func() { lame("-p", "-b", few) },
					"FFmpeg, constant": func() { ffmpeg("-b:a", few+"k") },
					"FFmpeg, variable": func() { ffmpeg("-q:a", "2") },
					"here, V0":         func() { write(t, withFFmpeg(t), path, spec, snd) },
					"here, constant":   func() { write(t, withFFmpeg(t), path, with(spec, 96_000, false), snd) },
					"here, average":    func() { write(t, withFFmpeg(t), path, with(spec, 61_234, true), snd) },
				} {
					make()
					for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
						got := exact(t, name, box, path, frames)
						for c := range got {
							if k := lag(snd[c], got[c]); k != 0 {
								t.Errorf("%s: channel %d is late by %d frames", name, c, k)
							}
						}
					}
				}
			})
		}
	}
}

// with returns a spec with a bit rate, constant or of that mean.
func with(s Spec, bitRate int, variable bool) Spec {
	s.BitRate, s.Variable, s.Quality = bitRate, variable, -1
	return s
}

// surf is noise without any period, of mostly low frequencies, different in every channel.
func surf(channels, frames int) audio.Block {
	b, rng := audio.NewBlock(channels, frames), rand.New(rand.NewPCG(5, 6))
	for c := range b {
		x := 0.0
		for i := range b[c] {
			x += 0.3 * (2*rng.Float64() - 1 - x)
			b[c][i] = float32(math.Round(x*0x7000) / 0x8000)
		}
	}
	return b
}

// exact reads an MP3 that has to hold so many frames and to say so. Rates below 16 kHz need FFmpeg.
func exact(t *testing.T, name string, box *Toolbox, path string, frames int) audio.Block {
	t.Helper()
	r, err := box.Open(t.Context(), path)
	if box.FFmpeg() == "" && errors.Is(err, ErrUnsupported) && strings.Contains(err.Error(), "FFmpeg") {
		if stream, _ := ffprobe(t, path); atoi(fmt.Sprint(stream["sample_rate"])) < 16_000 {
			return nil
		}
	}
	if err != nil {
		t.Errorf("%s: %v", name, err)
		return nil
	}
	defer r.Close()
	got, err := drain(r, 4096)
	if err != nil || got.Frames() != frames || r.Info().Frames != int64(frames) || r.(Damaged).Damage() != "" {
		t.Errorf("%s by %s: %d frames, promised %d, want %d: %v %s", name, r.Info().Decoder, got.Frames(), r.Info().Frames, frames, err, r.(Damaged).Damage())
	}
	return got
}

// Every length is exact: around those of granules (576), frames, decoders' delays (529, 1105) and a second. The note agrees
// with what LAME's own says and its checksum is right, in each of the layouts that the note has.
func TestMP3AnyLength(t *testing.T) {
	box := withFFmpeg(t)
	for _, layout := range []audio.Format{{Rate: 11025, Layout: audio.Mono}, stereo(22050), {Rate: 32000, Layout: audio.Mono}, stereo(44100)} {
		for _, frames := range []int{1, 46, 47, 575, 576, 577, 1105, 1152, 1153, 44101} {
			t.Run(fmt.Sprintf("%d Hz, %d frames", layout.Rate, frames), func(t *testing.T) {
				t.Parallel()
				snd, path := programme(layout.Layout.Channels, frames, 16, 0.6), filepath.Join(t.TempDir(), "a.mp3")
				spec := Spec{Container: "mp3", Codec: "mp3", Format: layout, BitRate: 64_000}
				if frames%2 == 1 {
					spec.BitRate = 0
				}
				write(t, box, path, spec, snd)
				for _, box := range []*Toolbox{box, withoutFFmpeg()} {
					exact(t, path, box, path, frames)
				}
				got := noteOf(t, path)
				byLAME := filepath.Join(t.TempDir(), "b.mp3")
				run(t, "lame", "--quiet", "-b", "64", "--resample", fmt.Sprint(float64(layout.Rate)/1000), writeWAV(t, snd, layout.Rate), byLAME)
				if want := noteOf(t, byLAME); got != want {
					t.Errorf("the note says %+v, LAME's %+v", got, want)
				}
			})
		}
	}
}

// noteFigures are what a note says about its file: all but frames, delay and padding is checked by noteOf.
type noteFigures struct{ frames, delay, padding int }

// noteOf reads the note of an MP3 by LAME's description of it, and fails if its sums of bytes or checksums are wrong.
func noteOf(t *testing.T, path string) noteFigures {
	t.Helper()
	file := load(t, path)
	if string(file[:3]) == "ID3" {
		file = file[10+int(file[8])<<7+int(file[9]):]
	}
	at := max(bytes.Index(file[:64], []byte("Xing")), bytes.Index(file[:64], []byte("Info")))
	if at < 0 || file[at+7] != 15 {
		t.Fatalf("%s has no note", path)
	}
	u32 := func(at int) int { return int(binary.BigEndian.Uint32(file[at:])) }
	own := at + 120
	first := parseMPEG(file).length
	if bytes.HasPrefix(file[own:], []byte("LAME")) || bytes.HasPrefix(file[own:], []byte("Lavf")) {
		if sum := int(binary.BigEndian.Uint16(file[own+34:])); sum != slowCRC(file[:own+34]) {
			t.Errorf("%s: the note's checksum is %#x", path, sum)
		}
		if sum := int(binary.BigEndian.Uint16(file[own+32:])); sum != slowCRC(file[first:]) {
			t.Errorf("%s: the sound's checksum is %#x", path, sum)
		}
	}
	if u32(at+12) != len(file) || u32(own+28) != len(file) {
		t.Errorf("%s: %d and %d bytes stated of %d", path, u32(at+12), u32(own+28), len(file))
	}
	return noteFigures{u32(at + 8), int(file[own+21])<<4 | int(file[own+22])>>4, int(file[own+22]&15)<<8 | int(file[own+23])}
}

// slowCRC divides by x¹⁶ + x¹⁵ + x² + 1 bit by bit, as long division on paper, each byte's lowest bit first. The check value
// of this checksum, known as CRC-16/ARC, is 0xBB3D for "123456789".
func slowCRC(b []byte) int {
	rest := 0
	for _, c := range b {
		for bit := range 8 {
			in := int(c)>>bit&1 ^ rest>>15
			rest = rest << 1 & 0xFFFF
			if in == 1 {
				rest ^= 0x8005
			}
		}
	}
	mirrored := 0
	for bit := range 16 {
		mirrored |= rest >> bit & 1 << (15 - bit)
	}
	return mirrored
}

func TestChecksumOfANote(t *testing.T) {
	if digits := []byte("123456789"); crc16(digits) != 0xBB3D || slowCRC(digits) != 0xBB3D {
		t.Errorf("%#x, %#x", crc16(digits), slowCRC(digits))
	}
}

// An MP3 that says nothing of its encoder's delay, or in a note that has no place for it, is delivered whole, with all
// decoders alike, and promises no length to the frame.
func TestMP3WithoutGaplessFigures(t *testing.T) {
	snd, dir := programme(2, 20_011, 16, 0.6), t.TempDir()
	path := filepath.Join(dir, "a.mp3")
	run(t, "lame", "--quiet", "-t", "-b", "128", writeWAV(t, snd, 44100), path)
	bare := load(t, path)
	// A frame of nothing whose note is the other kind: "VBRI", version, delay, quality, bytes, MPEG frames, no table.
	first := parseMPEG(bare).length
	frames := 0
	for b := bare; len(b) > 0; b = b[parseMPEG(b).length:] {
		frames++
	}
	note := slices.Concat(bare[:4], make([]byte, 32), []byte("VBRI\x00\x01\x00\x00\x00\x4B"))
	note = binary.BigEndian.AppendUint32(note, uint32(first+len(bare)))
	note = binary.BigEndian.AppendUint32(note, uint32(frames))
	note = append(note, make([]byte, first-len(note))...)
	want, info := decode(t, withFFmpeg(t), path)
	if info.Frames != -1 || info.Variable || want.Frames() != 1152*frames {
		t.Errorf("%d frames of %d: %+v", want.Frames(), 1152*frames, info)
	}
	noted := save(t, "b.mp3", slices.Concat(note, bare))
	for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
		got, info := decode(t, box, noted)
		if got.Frames() != want.Frames() || info.Frames != int64(1152*frames) || !info.Variable || info.BitRate/1000 != 128+128/frames {
			t.Errorf("%d frames, %+v", got.Frames(), info)
		}
		if k := lag(want[0], got[0]); k != 0 {
			t.Errorf("%s: late by %d frames", info.Decoder, k)
		}
	}
}

// A copy has the kind of bit rate its source had: constant of the same, or variable of about the same mean.
func TestMP3KeepsItsKindOfBitRate(t *testing.T) {
	t.Parallel()
	box, dir := withFFmpeg(t), t.TempDir()
	wav := filepath.Join(dir, "a.wav")
	run(t, "sox", "-n", "-r", "44100", "-c", "2", wav, "synth", "20", "pinknoise", "tremolo", "0.3", "90", "gain", "-12")
	for _, args := range []string{"-b 96", "-b 320", "-V 0", "-V 4", "-V 7", "--abr 140", "-t -V 3", "-t -b 128", "-m m -V 5"} {
		source, path := filepath.Join(dir, "a.mp3"), filepath.Join(dir, "b.mp3")
		if out, err := exec.Command("lame", slices.Concat([]string{"--quiet"}, strings.Fields(args), []string{wav, source})...).CombinedOutput(); err != nil {
			t.Fatalf("%v: %s", err, out)
		}
		snd, was := decode(t, box, source)
		write(t, box, path, box.SpecFor(was, Wish{}), snd)
		is := open(t, box, path).Info()
		if is.Variable == strings.Contains(args, "-b ") || is.Variable != was.Variable {
			t.Errorf("%s: variable %v, copy %v", args, was.Variable, is.Variable)
		}
		off := float64(is.BitRate)/float64(was.BitRate) - 1
		t.Logf("%s: %d, copy %d", args, was.BitRate, is.BitRate)
		if !is.Variable && off != 0 || off < -0.05 || off > 0.1 {
			t.Errorf("%s: %d bit/s, copy %d", args, was.BitRate, is.BitRate)
		}
	}
}
