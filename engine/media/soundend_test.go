package media

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"

	"evenshelf/engine/audio"
	"evenshelf/engine/tags/id3"
)

// apeTag is an APEv2 tag of one item, laid out as hydrogenaudio's description of the format says: a footer, and
// a header of the same shape if asked for.
func apeTag(header bool) []byte {
	item := append(binary.LittleEndian.AppendUint32(nil, 4), "\x00\x00\x00\x00Title\x00Song"...)
	edge := func(flags uint32) []byte {
		b := []byte("APETAGEX")
		for _, v := range []uint32{2000, uint32(len(item) + 32), 1, flags} {
			b = binary.LittleEndian.AppendUint32(b, v)
		}
		return append(b, make([]byte, 8)...)
	}
	if !header {
		return append(item, edge(0)...)
	}
	return slices.Concat(edge(1<<31|1<<29), item, edge(1<<31))
}

// tails are what is found behind the sound of good recordings, alone and piled up.
func tails() map[string][]byte {
	zeros := func(n int) []byte { return make([]byte, n) }
	v1 := append([]byte("TAGA song"), zeros(119)...) // ends in zeros itself
	words := "LYRICSBEGININD0000200ETT00004Song"
	lyrics := fmt.Appendf([]byte(words), "%06dLYRICS200", len(words))
	all := map[string][]byte{
		"a zero": zeros(1), "9 zeros": zeros(9), "10 zeros": zeros(10), "2 KiB of zeros": zeros(2048), "60,000 zeros": zeros(60_000),
		"ID3v1": v1, "enhanced ID3v1": slices.Concat([]byte("TAG+A song"), zeros(217), v1),
		"APEv2": apeTag(false), "APEv2 with header": apeTag(true), "Lyrics3v2": lyrics,
	}
	all["everything"] = slices.Concat(zeros(777), apeTag(true), lyrics, v1)
	all["everything, the other way round"] = slices.Concat(v1, zeros(77), lyrics, zeros(5), apeTag(false), zeros(5000))
	return all
}

// Tags and zeros behind the sound of a FLAC are no damage, whoever decodes it. Real damage stays damage.
func TestBehindFLAC(t *testing.T) {
	snd := programme(2, 9000, 16, 0.5)
	path := filepath.Join(t.TempDir(), "a.flac")
	run(t, "flac", "-s", "-o", path, writeWAV(t, snd, 44100))
	file := load(t, path)
	bad := bytes.Clone(file)
	bad[len(bad)/2] ^= 1
	for name, tail := range tails() {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			path := save(t, "b.flac", slices.Concat(file, tail))
			for _, r := range []Reader{byFFmpeg(t, path), open(t, withFFmpeg(t), path), open(t, withoutFFmpeg(), path)} {
				got, _ := drained(t, r)
				sameSound(t, got, snd)
			}
			if !strings.HasPrefix(name, "everything") {
				return
			}
			r := byFFmpeg(t, save(t, "c.flac", slices.Concat(bad, tail)))
			if _, err := drain(r, 4096); err == nil && r.(Damaged).Damage() == "" {
				t.Error("a wrong bit in front of it was not noticed")
			}
		})
	}
}

// mp3Corpus makes MPEG audio of many kinds, among them frames that an encoder filled up with zeros.
func mp3Corpus(t *testing.T) map[string][]byte {
	t.Helper()
	dir, silence := t.TempDir(), audio.NewBlock(2, 30_000)
	loud, quiet := writeWAV(t, programme(2, 30_000, 16, 0.6), 44100), writeWAV(t, silence, 44100)
	corpus := map[string][]byte{}
	for name, cmd := range map[string][]string{
		"320 kbit/s":                   {"lame", "--quiet", "-b", "320", loud},
		"320 kbit/s of silence":        {"lame", "--quiet", "-b", "320", quiet},
		"320 kbit/s without reservoir": {"lame", "--quiet", "-b", "320", "--nores", quiet},
		"128 kbit/s of silence":        {"lame", "--quiet", "-b", "128", quiet},
		"variable":                     {"lame", "--quiet", "-V", "2", loud},
		"variable, silence, no note":   {"lame", "--quiet", "-t", "-V", "2", quiet},
		"32 kHz, longest frames":       {"lame", "--quiet", "--resample", "32", "-b", "320", quiet},
		"MPEG-2.5, mono":               {"lame", "--quiet", "--resample", "8", "-m", "m", "-b", "64", loud},
		"by FFmpeg":                    {"ffmpeg", "-v", "error", "-i", quiet, "-b:a", "192k"},
		"layer 2":                      {"ffmpeg", "-v", "error", "-i", quiet, "-c:a", "mp2", "-b:a", "384k", "-f", "mp2"},
	} {
		path := filepath.Join(dir, strings.ReplaceAll(name, "/", " ")+".mp3")
		run(t, cmd[0], append(cmd[1:], path)...)
		corpus[name] = load(t, path)
	}
	return corpus
}

// Nothing is cut off an MP3 that is all sound, even where its last frames end in zeros, and what is behind the
// sound is cut off at the very byte where its encoder stopped.
func TestBehindMP3(t *testing.T) {
	t.Parallel()
	corpus := mp3Corpus(t)
	zeros := 0
	for name, file := range corpus {
		zeros = max(zeros, len(file)-len(bytes.TrimRight(file, "\x00")))
		k, err := sniff(bytes.NewReader(file))
		if err != nil {
			t.Fatal(name, err)
		}
		for what, tail := range tails() {
			for _, tail := range [][]byte{nil, tail} {
				whole := slices.Concat(file, tail)
				end, err := soundEnd(bytes.NewReader(whole), k.start, int64(len(whole)), true)
				if err != nil || end != int64(len(file)) {
					t.Errorf("%s with %s: the sound ends at %d of %d: %v", name, what, end, len(file), err)
				}
			}
		}
		want, info := decode(t, withFFmpeg(t), save(t, "a.mp3", file))
		tail := tails()["everything, the other way round"]
		got, tailed := decode(t, withFFmpeg(t), save(t, "b.mp3", slices.Concat(file, tail)))
		sameSound(t, got, want)
		if info != tailed {
			t.Errorf("%s: %+v, with something behind it %+v", name, info, tailed)
		}
	}
	if zeros < 100 {
		t.Errorf("no file of the corpus ends in more than %d zeros: it proves nothing", zeros)
	}
}

// Every kind of tail leaves both MP3 decoders content.
func TestBehindMP3Decoded(t *testing.T) {
	path := filepath.Join(t.TempDir(), "a.mp3")
	run(t, "lame", "--quiet", "-b", "128", writeWAV(t, programme(2, 20_000, 16, 0.5), 44100), path)
	file := load(t, path)
	for name, tail := range tails() {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			path := save(t, "b.mp3", slices.Concat(file, tail))
			for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
				if got, info := decode(t, box, path); got.Frames() != 20_000 || info.Frames != 20_000 {
					t.Errorf("%s: %d frames, promised %d", info.Decoder, got.Frames(), info.Frames)
				}
			}
		})
	}
}

// The end is found in real recordings of 2004, where there is an ID3v1 tag if anything.
func TestSoundEndOfRealMP3s(t *testing.T) {
	paths, _ := filepath.Glob(filepath.Join(filepath.Dir(music(t)), "*.mp3"))
	for _, path := range paths {
		file := load(t, path)
		k, err := sniff(bytes.NewReader(file))
		if err != nil {
			t.Fatal(err)
		}
		want := len(file)
		if string(file[want-128:want-125]) == "TAG" {
			want -= 128
		}
		for _, behind := range []int{0, 3000} {
			whole := append(bytes.Clone(file), make([]byte, behind)...)
			if end, err := soundEnd(bytes.NewReader(whole), k.start, int64(len(whole)), true); err != nil || end != int64(want) {
				t.Errorf("%s and %d zeros: %d of %d, %v", path, behind, end, want, err)
			}
		}
	}
}

// The last bytes of a FLAC are a checksum, which may end in zeros: they stay. And a file that is nothing but
// tags, or zeros without end, ends the search.
func TestSoundEndIsCareful(t *testing.T) {
	for _, zeros := range []int{0, 1, 2, 8, 9, 10, 11, 500, 40_000, id3.MaxZeros} {
		file := append([]byte("fLaC, frames and a checksum: \x12"), make([]byte, zeros)...)
		end, err := soundEnd(bytes.NewReader(file), 0, int64(len(file)), false)
		if want := len(file) - zeros + min(zeros, keepZeros); err != nil || end != int64(want) {
			t.Fatalf("%d zeros: %d, want %d: %v", zeros, end, want, err)
		}
	}
	end, err := soundEnd(bytes.NewReader(append([]byte("fLaC"), make([]byte, id3.MaxZeros+1)...)), 0, id3.MaxZeros+5, false)
	if err != nil || end != id3.MaxZeros+5 {
		t.Errorf("%d of %d: %v", end, id3.MaxZeros+5, err)
	}
	f, err := os.Create(filepath.Join(t.TempDir(), "sparse"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if err := f.Truncate(1 << 40); err != nil {
		t.Fatal(err)
	}
	if end, err := soundEnd(f, 4, 1<<40, true); err != nil || end < 1<<39 {
		t.Errorf("a sparse file: %d, %v", end, err)
	}
	for _, file := range [][]byte{nil, make([]byte, 50_000), bytes.Repeat(apeTag(false), 5), []byte("LYRICS200"), []byte("999999LYRICS200")} {
		if end, err := soundEnd(bytes.NewReader(file), 0, int64(len(file)), true); err != nil || end < 0 || end > int64(len(file)) {
			t.Errorf("%d bytes: %d, %v", len(file), end, err)
		}
	}
}

// Zeros where sound should be, as an unfinished download leaves them, are damage even if no header says how much
// sound there should be.
func TestZerosInsteadOfSound(t *testing.T) {
	t.Parallel()
	source := writeWAV(t, programme(2, 200_000, 16, 0.5), 44100)
	for name, cmd := range map[string][]string{"mp3": {"lame", "--quiet", "-t", "-b", "320", source}, "flac": {"flac", "-s", source, "-o"}} {
		path := filepath.Join(t.TempDir(), "a."+name)
		run(t, cmd[0], append(cmd[1:], path)...)
		file := load(t, path)
		clear(file[len(file)/2:])
		r := open(t, withFFmpeg(t), save(t, "b."+name, file))
		if all, err := drain(r, 4096); err == nil && r.(Damaged).Damage() == "" || all.Frames() < 80_000 {
			t.Errorf("%s: %d frames, nobody noticed", name, all.Frames())
		}
	}
}

// MP3 of free format is named as what it is.
func TestFreeFormatMP3(t *testing.T) {
	for _, bits := range []string{"8", "320", "500", "640"} {
		path := filepath.Join(t.TempDir(), "a.mp3")
		run(t, "lame", "--quiet", "--freeformat", "-b", bits, writeWAV(t, programme(2, 30_000, 16, 0.5), 44100), path)
		for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
			if _, err := box.Open(context.Background(), path); !errors.Is(err, ErrUnsupported) || !strings.Contains(err.Error(), "free-format MP3") {
				t.Errorf("%s kbit/s: %v", bits, err)
			}
		}
	}
}

// A count of frames that was never filled in, or is too small, costs no sound, with either decoder.
func TestMP3WrongCount(t *testing.T) {
	t.Parallel()
	path := filepath.Join(t.TempDir(), "a.mp3")
	run(t, "lame", "--quiet", "-V", "2", writeWAV(t, programme(2, 60_000, 16, 0.5), 44100), path)
	file := load(t, path)
	at := bytes.Index(file, []byte("Xing")) + 8
	for _, count := range []uint32{0, 20} {
		binary.BigEndian.PutUint32(file[at:], count)
		path := save(t, "b.mp3", file)
		for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
			r := open(t, box, path)
			all, err := drain(r, 4096)
			if promised := r.Info().Frames; err != nil || all.Frames() < 60_000-1152 || all.Frames() > 60_000+2*1152 || (promised < 0) != (count == 0) {
				t.Errorf("%s, %d stated: %d frames, promised %d: %v", r.Info().Decoder, count, all.Frames(), promised, err)
			}
		}
	}
}

// Frames missing from the middle: the recording is torn, and what the decoder complained about is told.
func TestHoleIsTold(t *testing.T) {
	path := filepath.Join(t.TempDir(), "a.flac")
	run(t, "flac", "-s", "-o", path, writeWAV(t, programme(2, formatFrames, 16, 0.5), 44100))
	file := load(t, path)
	hole := slices.Concat(file[:len(file)/2], file[len(file)/2+len(file)/8:])
	for i := range 8000 {
		hole[len(file)/2-4000+i] = 0x55
	}
	path = save(t, "b.flac", hole)
	for _, r := range []Reader{byFFmpeg(t, path), open(t, withFFmpeg(t), path), open(t, withoutFFmpeg(), path)} {
		if _, err := drain(r, 4096); !errors.Is(err, io.ErrUnexpectedEOF) || r.(Damaged).Damage() == "" {
			t.Errorf("%s: %v, damage %q", r.Info().Decoder, err, r.(Damaged).Damage())
		}
	}
}

// Giving up while FFmpeg is still looking at the recording says nothing about the recording.
func TestCancelledOpening(t *testing.T) {
	dir := t.TempDir()
	slow := filepath.Join(dir, "ffmpeg")
	script := "#!/bin/sh\n[ \"$1\" = -version ] && exec ffmpeg -version\nexec sleep 600\n"
	if err := os.WriteFile(slow, []byte(script), 0o755); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(dir, "a.mp3")
	run(t, "lame", "--quiet", writeWAV(t, programme(2, 9000, 16, 0.5), 44100), path)
	why := errors.New("the operator changed her mind")
	ctx, cancel := context.WithTimeoutCause(context.Background(), 300*time.Millisecond, why)
	defer cancel()
	if _, err := New(slow).Open(ctx, path); !errors.Is(err, why) || !strings.HasPrefix(err.Error(), path+": ") {
		t.Errorf("%v", err)
	}
}

// Errors begin with the path of the recording and name it nowhere else.
func TestErrorsNameThePathOnce(t *testing.T) {
	t.Parallel()
	check := func(what, path string, err error) {
		t.Helper()
		if err == nil || !strings.HasPrefix(err.Error(), path+": ") || strings.Count(err.Error(), path) != 1 {
			t.Errorf("%s: %v", what, err)
		}
	}
	why := errors.New("the operator changed her mind")
	for name, file := range formats(t) {
		for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
			path := save(t, "a."+name, file)
			ctx, cancel := context.WithCancelCause(context.Background())
			r, err := box.Open(ctx, path)
			if err != nil {
				check("opening "+name, path, err)
				cancel(nil)
				continue
			}
			cancel(why)
			_, err = drain(r, 4096)
			check("cancelled "+name, path, err)
			if !errors.Is(err, why) {
				t.Errorf("%s: %v", name, err)
			}
			r.Close()
			_, err = box.Open(ctx, path)
			check("opening cancelled "+name, path, err)

			for _, cut := range []int{30, len(file) / 2} {
				path := save(t, "cut."+name, file[:cut])
				r, err := box.Open(context.Background(), path)
				if err == nil {
					_, err = drain(r, 4096)
					r.Close()
				}
				if err != nil || name != "ogg" {
					check(fmt.Sprintf("%s cut at %d", name, cut), path, err)
				}
			}
		}
	}
	long := filepath.Join(t.TempDir(), "long.flac")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "anoisesrc=d=120:r=48000", long)
	r := open(t, withFFmpeg(t), long)
	if err := r.(*ffReader).child.cmd.Process.Signal(syscall.SIGKILL); err != nil {
		t.Fatal(err)
	}
	_, err := drain(r, 4096)
	check("killed", long, err)
	_, err = withFFmpeg(t).Open(context.Background(), long+"x")
	check("missing", long+"x", err)
}
