package media

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"syscall"
	"testing"
	"time"

	"evenshelf/engine/audio"
)

func TestNotARecording(t *testing.T) {
	playlist := "#EXTM3U\n#EXT-X-TARGETDURATION:10\n#EXTINF:10,\n/etc/hostname\n#EXT-X-ENDLIST\n"
	random := make([]byte, 200_000)
	rng := rand.New(rand.NewPCG(5, 6))
	for i := range random {
		random[i] = byte(rng.Uint32())
	}
	tests := []struct {
		name, content string
		kind          error
		words         string
	}{
		{"empty.wav", "", ErrEmpty, "empty"},
		{"hls.mp3", playlist, ErrUnsupported, "a playlist"},
		{"list.wav", "ffconcat version 1.0\nfile /etc/passwd\n", ErrUnsupported, "a playlist"},
		{"concat.mp3", "file '/etc/passwd'\n", ErrUnsupported, "text"},
		{"session.wav", "v=0\no=- 0 0 IN IP4 127.0.0.1\ns=x\nc=IN IP4 127.0.0.1\nm=audio 5004 RTP/AVP 0\n", ErrUnsupported, "text"},
		{"notes.flac", "Grüße aus dem Studio\n", ErrUnsupported, "text"},
		{"zeros.mp3", strings.Repeat("\x00", 5000), ErrUnsupported, "only zeros"},
		{"random.mp3", string(random), ErrUnsupported, "not a sound format"},
		{"cover.mp3", "\xFF\xD8\xFF\xE0\x00\x10JFIF", ErrUnsupported, "a picture"},
		{"book.m4a", "PK\x03\x04 and so on", ErrUnsupported, "an archive"},
	}
	for _, test := range tests {
		for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
			path := save(t, test.name, []byte(test.content))
			_, err := box.Open(context.Background(), path)
			if !errors.Is(err, test.kind) || !strings.Contains(err.Error(), test.words) || !strings.HasPrefix(err.Error(), path+": ") {
				t.Errorf("%s: %v", test.name, err)
			}
		}
	}
	onlyTag := save(t, "tag.mp3", []byte("ID3\x04\x00\x00\x00\x00\x00\x04abcd"))
	var bad *FormatError
	if _, err := withFFmpeg(t).Open(context.Background(), onlyTag); !errors.As(err, &bad) {
		t.Errorf("only a tag: %v", err)
	}
}

func TestNotAFile(t *testing.T) {
	dir := t.TempDir()
	pipe := filepath.Join(dir, "pipe.wav")
	if err := syscall.Mkfifo(pipe, 0o644); err != nil {
		t.Fatal(err)
	}
	for path, want := range map[string]error{
		filepath.Join(dir, "missing.wav"): os.ErrNotExist,
		dir:                               ErrUnsupported,
		pipe:                              ErrUnsupported, // and it must not hang
		"/proc/self/mem":                  syscall.EIO,    // a file that cannot be read, for root too
	} {
		if _, err := withFFmpeg(t).Open(context.Background(), path); !errors.Is(err, want) || !strings.HasPrefix(err.Error(), path+": ") {
			t.Errorf("%s: %v", path, err)
		}
	}
}

const formatFrames = 120_000

// formats makes one small file of each format that matters most, by outside programs.
func formats(t *testing.T) map[string][]byte {
	t.Helper()
	dir, source := t.TempDir(), writeWAV(t, programme(2, formatFrames, 16, 0.5), 44100)
	made := map[string][]byte{"wav": load(t, source)}
	for name, cmd := range map[string][]string{
		"mp3":  {"lame", "--quiet", "-b", "128", source},
		"flac": {"flac", "-s", source, "-o"},
		"ogg":  {"ffmpeg", "-v", "error", "-i", source, "-c:a", "libvorbis"},
		"m4a":  {"ffmpeg", "-v", "error", "-i", source, "-movflags", "+faststart"},
	} {
		path := filepath.Join(dir, "a."+name)
		run(t, cmd[0], append(cmd[1:], path)...)
		made[name] = load(t, path)
	}
	return made
}

// A cut recording is never taken for a whole one where its header tells its length, and what is there
// is delivered. Ogg keeps no length in front: the cut is not noticeable there.
func TestCutRecordings(t *testing.T) {
	for name, file := range formats(t) {
		for _, share := range []float64{0.5, 0.9} {
			t.Run(fmt.Sprintf("%s, %v", name, share), func(t *testing.T) {
				t.Parallel()
				path := save(t, "cut."+name, file[:int(share*float64(len(file)))])
				for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
					r, err := box.Open(context.Background(), path)
					if box.FFmpeg() == "" && errors.Is(err, ErrUnsupported) {
						continue
					}
					if err != nil {
						t.Fatal(err)
					}
					all, err := drain(r, 1000)
					decoder := r.Info().Decoder
					r.Close()
					if name != "ogg" && !errors.Is(err, io.ErrUnexpectedEOF) || name == "ogg" && err != nil {
						t.Errorf("%s: %v", decoder, err)
					}
					if err != nil && !strings.Contains(err.Error(), path) {
						t.Errorf("%s: %q does not name the file", decoder, err)
					}
					if want := share * formatFrames; float64(all.Frames()) < want-40_000 || float64(all.Frames()) > want+9000 {
						t.Errorf("%s: %d frames, want about %.0f", decoder, all.Frames(), want)
					}
				}
			})
		}
	}
}

// Damage in the middle is survived, and it shows: as an error, or by Damage.
func TestDamageInTheMiddleShows(t *testing.T) {
	for name, file := range formats(t) {
		if name == "wav" {
			continue // any bytes are samples
		}
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			damaged := append([]byte(nil), file...)
			rng := rand.New(rand.NewPCG(7, 8))
			for i := len(file) / 2; i < len(file)/2+1500; i++ {
				damaged[i] = byte(rng.Uint32())
			}
			path := save(t, "damaged."+name, damaged)
			r := open(t, withFFmpeg(t), path)
			all, err := drain(r, 4096)
			if name == "flac" { // what the library reads up to the damage and FFmpeg from there on is as FFmpeg reads it all
				whole := byFFmpeg(t, path)
				want, e := drain(whole, 4096)
				sameSound(t, all, want)
				if r.(Damaged).Damage() != whole.(Damaged).Damage() || (err == nil) != (e == nil) || r.Info().Decoder != whole.Info().Decoder {
					t.Errorf("%v, %q; by FFmpeg alone: %v, %q", err, r.(Damaged).Damage(), e, whole.(Damaged).Damage())
				}
			}
			complaint := r.(Damaged).Damage()
			if err == nil && complaint == "" {
				t.Error("nobody noticed")
			}
			if all.Frames() < 40_000 || all.Frames() > formatFrames+5000 {
				t.Errorf("%d frames", all.Frames())
			}
			if len(complaint) > 1000 || strings.Contains(complaint, "\n") || strings.Contains(complaint, "/dev/fd") {
				t.Errorf("complaint %q", complaint)
			}
		})
	}
}

// A single wrong bit in a FLAC's sound is noticed by whichever decoder reads it: every frame has a checksum.
// The fallback, with no FFmpeg to turn to, ends there.
func TestOneWrongBitInFLACShows(t *testing.T) {
	file := formats(t)["flac"]
	file[len(file)/2] ^= 1
	path := save(t, "bit.flac", file)
	for name, r := range map[string]Reader{"chosen": open(t, withFFmpeg(t), path), "FFmpeg": byFFmpeg(t, path)} {
		all, err := drain(r, 4096)
		if err == nil && r.(Damaged).Damage() == "" || all.Frames() < formatFrames/2-4096 {
			t.Errorf("%s: %d frames, nobody noticed", name, all.Frames())
		}
	}
	all, err := drain(open(t, withoutFFmpeg(), path), 4096)
	if !errors.Is(err, io.ErrUnexpectedEOF) || !strings.Contains(err.Error(), path) || all.Frames() < formatFrames/4 {
		t.Errorf("without FFmpeg: %d frames, %v", all.Frames(), err)
	}
}

// Bit flips anywhere: no panic, no hang, no more sound than before, an error or not. The fallback
// decoders run in our own process and get the most of it.
func TestBitFlips(t *testing.T) {
	var before runtime.MemStats
	runtime.ReadMemStats(&before)
	rng := rand.New(rand.NewPCG(9, 10))
	for name, file := range formats(t) {
		if name == "ogg" || name == "m4a" {
			continue
		}
		for range 12 {
			bad := append([]byte(nil), file...)
			for range 1 + rng.IntN(20) {
				at := rng.IntN(len(bad))
				if rng.IntN(2) == 0 {
					at = rng.IntN(200) // headers are where it hurts
				}
				bad[at] ^= 1 << rng.IntN(8)
			}
			r, err := withoutFFmpeg().Open(context.Background(), save(t, "flipped."+name, bad))
			if err != nil {
				continue
			}
			frames, err := audio.Each(r, func(audio.Block) error { return nil })
			if frames > 2*formatFrames {
				t.Errorf("%s: %d frames, %v", name, frames, err)
			}
			r.Close()
		}
	}
	var after runtime.MemStats
	runtime.ReadMemStats(&after)
	if grown := int64(after.HeapSys) - int64(before.HeapSys); grown > 256<<20 {
		t.Errorf("the heap grew by %d MiB", grown>>20)
	}
}

// children returns the ids of this process's children.
func children(t *testing.T) []string {
	t.Helper()
	tasks, err := filepath.Glob("/proc/self/task/*/children")
	if err != nil || len(tasks) == 0 {
		t.Fatal("cannot list child processes")
	}
	var ids []string
	for _, f := range tasks {
		b, _ := os.ReadFile(f) // a thread may have ended
		ids = append(ids, strings.Fields(string(b))...)
	}
	return ids
}

// Cancelling, or closing early, ends the child and reaps it.
func TestNoChildIsLeft(t *testing.T) {
	box := withFFmpeg(t)
	long := filepath.Join(t.TempDir(), "long.flac")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "anoisesrc=d=120:r=48000", long)
	why := errors.New("the operator changed her mind")

	ctx, cancel := context.WithCancelCause(context.Background())
	r, err := box.Open(ctx, long)
	if err != nil {
		t.Fatal(err)
	}
	buf := audio.NewBlock(1, 4096)
	if _, err := r.ReadBlock(buf); err != nil {
		t.Fatal(err)
	}
	if len(children(t)) == 0 {
		t.Fatal("there is no child to end: the test proves nothing")
	}
	cancel(why)
	if _, err := r.ReadBlock(buf); !errors.Is(err, why) {
		t.Errorf("after the cancel: %v", err)
	}
	r.Close()

	r = open(t, box, long)
	if _, err := r.ReadBlock(buf); err != nil {
		t.Fatal(err)
	}
	r.Close()
	r.Close()

	ctx, cancel = context.WithCancelCause(context.Background())
	s, err := box.Create(ctx, filepath.Join(t.TempDir(), "x"), Spec{Container: "mp3", Codec: "mp3", Format: stereo(44100)})
	if err != nil {
		t.Fatal(err)
	}
	cancel(why)
	if err := s.WriteBlock(audio.NewBlock(2, 100)); !errors.Is(err, why) {
		t.Errorf("writing after the cancel: %v", err)
	}
	if err := s.Close(); !errors.Is(err, why) {
		t.Errorf("closing after the cancel: %v", err)
	}
	if left := children(t); len(left) != 0 {
		t.Errorf("children %v are left", left)
	}
	if _, err := box.Open(ctx, long); !errors.Is(err, why) {
		t.Errorf("opening after the cancel: %v", err)
	}
}

// A child that neither works nor ends is stopped. sleep stands for it.
func TestStalledChildIsStopped(t *testing.T) {
	sleep, err := exec.LookPath("sleep")
	if err != nil {
		t.Fatal(err)
	}
	for _, decode := range []bool{true, false} {
		c, err := startChild(context.Background(), decode, nil, sleep, "600")
		if err != nil {
			t.Fatal(err)
		}
		c.stall = 50 * time.Millisecond
		start := time.Now()
		if decode {
			_, err = c.Read(make([]byte, 1))
		} else {
			_, err = c.Write(make([]byte, 4<<20)) // more than a pipe holds
		}
		if err == nil || !strings.Contains(err.Error(), "stood still") || time.Since(start) > 5*time.Second {
			t.Errorf("after %v: %v", time.Since(start), err)
		}
		if again := c.wait(); again == nil || !strings.Contains(again.Error(), "stood still") {
			t.Errorf("asked again: %v", again)
		}
		if c.cmd.ProcessState == nil {
			t.Error("the child was not reaped")
		}
	}
}

// A decoder or encoder that is killed from outside says nothing about the recording.
func TestKilledChildIsNotDamage(t *testing.T) {
	box := withFFmpeg(t)
	long := filepath.Join(t.TempDir(), "long.flac")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "anoisesrc=d=120:r=48000", long)
	for _, sig := range []syscall.Signal{syscall.SIGKILL, syscall.SIGTERM} {
		r := open(t, box, long)
		if err := r.(*ffReader).child.cmd.Process.Signal(sig); err != nil {
			t.Fatal(err)
		}
		if _, err := drain(r, 4096); !errors.Is(err, ErrKilled) || errors.Is(err, io.ErrUnexpectedEOF) || !strings.Contains(err.Error(), long) {
			t.Errorf("decoder, %v: %v", sig, err)
		}
	}
	s, err := box.Create(context.Background(), filepath.Join(t.TempDir(), "x"), Spec{Container: "mp3", Codec: "mp3", Format: stereo(44100)})
	if err != nil {
		t.Fatal(err)
	}
	if err := s.(*sink).w.(*ffWriter).child.cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	for block := audio.NewBlock(2, 4096); err == nil; {
		err = s.WriteBlock(block)
	}
	if closing := s.Close(); !errors.Is(err, ErrKilled) || closing != err {
		t.Errorf("encoder: %v, then %v", err, closing)
	}
}
