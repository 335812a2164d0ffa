package level

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

// Real recordings from Debian packages: music from asc-music, read speech from pocketsphinx-testdata.
const (
	music  = "/usr/share/games/asc/music/frontiers.mp3"
	spoken = "/usr/share/pocketsphinx/test/data/librivox/sense_and_sensibility_01_austen_64kb-0870.wav"
)

// ffmpeg runs the codec as an outside tool of these tests and returns what it wrote to its two outputs.
func ffmpeg(t *testing.T, stdin []byte, args ...string) (stdout []byte, text string) {
	t.Helper()
	cmd := exec.Command("ffmpeg", append([]string{"-hide_banner", "-y"}, args...)...)
	var out, errs bytes.Buffer
	cmd.Stdin, cmd.Stdout, cmd.Stderr = bytes.NewReader(stdin), &out, &errs
	if err := cmd.Run(); err != nil {
		t.Fatalf("ffmpeg %v: %v\n%s(the tests need Debian's ffmpeg, asc-music and pocketsphinx-testdata: see 'make test')", args, err, errs.String())
	}
	return out.Bytes(), errs.String()
}

// excerpt makes a file of 15 seconds of real music, multiplied by scale, in the format its name says.
func excerpt(t *testing.T, dir, name string, scale float32, args ...string) string {
	t.Helper()
	raw, _ := ffmpeg(t, nil, "-ss", "20", "-t", "15", "-i", music, "-f", "f32le", "-ar", "44100", "-ac", "2", "-")
	for i := 0; i < len(raw); i += 4 {
		v := math.Float32frombits(binary.LittleEndian.Uint32(raw[i:]))
		binary.LittleEndian.PutUint32(raw[i:], math.Float32bits(v*scale))
	}
	path := filepath.Join(dir, name)
	ffmpeg(t, raw, append(append([]string{"-f", "f32le", "-ar", "44100", "-ac", "2", "-i", "-"}, args...), path)...)
	return path
}

var (
	secondI  = regexp.MustCompile(`I:\s+(-?[\d.]+) LUFS`)
	secondTP = regexp.MustCompile(`Peak:\s+(-?[\d.]+) dBFS`)
)

// secondOpinion reads a file with FFmpeg's EBU R 128 meter, which reports tenths.
func secondOpinion(t *testing.T, path string) (integrated audio.LUFS, peak audio.DBTP) {
	t.Helper()
	_, text := ffmpeg(t, nil, "-i", path, "-filter_complex", "ebur128=peak=true", "-f", "null", "-")
	text = text[strings.LastIndex(text, "Summary:"):]
	i, tp := secondI.FindStringSubmatch(text), secondTP.FindStringSubmatch(text)
	if i == nil || tp == nil {
		t.Fatalf("no summary from the meter:\n%s", text)
	}
	iv, _ := strconv.ParseFloat(i[1], 64)
	tv, _ := strconv.ParseFloat(tp[1], 64)
	return audio.LUFS(iv), audio.DBTP(tv)
}

func levelInto(t *testing.T, profile, source, target string) Outcome {
	t.Helper()
	e := &Engine{Media: media.Find()}
	o, err := e.Level(context.Background(), source, Task{Profile: named(t, profile)}, target)
	if err != nil {
		t.Fatalf("%s: %v", source, err)
	}
	return o
}

// The main job on real music in every format that can be delivered: the target is met, the ceiling is
// kept, an outside meter agrees, nothing is shifted, and levelling the copy again changes nothing.
func TestRealMusicInEveryFormat(t *testing.T) {
	dir := t.TempDir()
	for name, made := range map[string]struct {
		scale float32
		args  []string
	}{
		"16.wav":   {1, []string{"-c:a", "pcm_s16le"}},
		"24.wav":   {1, []string{"-c:a", "pcm_s24le", "-ar", "48000"}},
		"loud.wav": {3, []string{"-c:a", "pcm_f32le"}},
		"low.flac": {0.02, []string{"-c:a", "flac"}},
		"cd.flac":  {1, []string{"-c:a", "flac", "-sample_fmt", "s16"}},
		"128.mp3":  {1, []string{"-c:a", "libmp3lame", "-b:a", "128k"}},
		"q4.ogg":   {1, []string{"-c:a", "libvorbis", "-q:a", "4"}},
		"96.opus":  {1, []string{"-c:a", "libopus", "-b:a", "96k"}},
		"aac.m4a":  {1, []string{"-c:a", "aac", "-b:a", "160k"}},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			source := excerpt(t, dir, name, made.scale, made.args...)
			copied := filepath.Join(dir, "copy-of-"+name)
			o := levelInto(t, "rotation", source, copied)
			if o.Verdict.State != Done {
				t.Fatalf("%s: %s", o.Verdict.State, o.Verdict.Reason)
			}
			if o.Extension != filepath.Ext(name) {
				t.Errorf("delivered as %s", o.Extension)
			}
			if off := math.Abs(float64(o.After.Integrated + 18)); off > 0.1 {
				t.Errorf("came out at %.2f LUFS", o.After.Integrated)
			}
			if o.After.TruePeak > -1+peakTolerance {
				t.Errorf("true peak %.2f dBTP", o.After.TruePeak)
			}
			if o.After.Frames != o.Before.Frames {
				t.Errorf("%d frames became %d", o.Before.Frames, o.After.Frames)
			}
			// 0.1 LU and 0.2 dB between two meters, each rounding to a tenth.
			integrated, peak := secondOpinion(t, copied)
			if math.Abs(float64(integrated-o.After.Integrated)) > 0.1 || math.Abs(float64(peak-o.After.TruePeak)) > 0.25 {
				t.Errorf("we read %.2f LUFS and %.2f dBTP, the outside meter %.1f and %.1f",
					o.After.Integrated, o.After.TruePeak, integrated, peak)
			}
			again := filepath.Join(dir, "again-"+name)
			if o := levelInto(t, "rotation", copied, again); !o.Plan.Untouched || o.Verdict.State != Done {
				t.Errorf("levelling the copy again: %s, %q", o.Verdict.State, o.Plan.Reason)
			}
			if !bytes.Equal(readFile(t, copied), readFile(t, again)) {
				t.Error("a recording within its profile was not copied byte for byte")
			}
		})
	}
}

func readFile(t *testing.T, path string) []byte {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// With 'untouched' the copy is the source times one number: nothing moves against anything else.
func TestUntouchedIsOneSteadyGain(t *testing.T) {
	dir := t.TempDir()
	source := excerpt(t, dir, "source.wav", 0.1, "-c:a", "pcm_f32le")
	copied := filepath.Join(dir, "copy.wav")
	o := levelInto(t, "untouched", source, copied)
	if o.Verdict.State != Done {
		t.Fatalf("%s: %s", o.Verdict.State, o.Verdict.Reason)
	}
	want, got := samples(t, source), samples(t, copied)
	if len(want) != len(got) {
		t.Fatalf("%d samples became %d", len(want), len(got))
	}
	gain := o.Plan.Gain.Linear()
	for i := range want {
		if diff := math.Abs(float64(got[i]) - gain*float64(want[i])); diff > 1e-6 {
			t.Fatalf("sample %d: %g is not %g × %g", i, got[i], gain, want[i])
		}
	}
}

// samples returns the first channel of a file.
func samples(t *testing.T, path string) (x []float32) {
	t.Helper()
	src, err := media.Find().Open(context.Background(), path)
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	if _, err := audio.Each(src, func(b audio.Block) error { x = append(x, b[0]...); return nil }); err != nil {
		t.Fatal(err)
	}
	return x
}

func TestReadSpeech(t *testing.T) {
	target := filepath.Join(t.TempDir(), "out.wav")
	o := levelInto(t, "rotation", spoken, target)
	if o.Verdict.State != Done || math.Abs(float64(o.After.Integrated+18)) > 0.1 {
		t.Errorf("%s at %.2f LUFS: %s", o.Verdict.State, o.After.Integrated, o.Verdict.Reason)
	}
}

func TestDeterministicBytes(t *testing.T) {
	dir := t.TempDir()
	source := excerpt(t, dir, "source.wav", 0.1, "-c:a", "pcm_s16le")
	levelInto(t, "rotation", source, filepath.Join(dir, "a"))
	levelInto(t, "rotation", source, filepath.Join(dir, "b"))
	if !bytes.Equal(readFile(t, filepath.Join(dir, "a")), readFile(t, filepath.Join(dir, "b"))) {
		t.Error("the same input and profile gave different bytes")
	}
}

func TestDamagedRecordings(t *testing.T) {
	dir := t.TempDir()
	whole := readFile(t, excerpt(t, dir, "whole.wav", 1, "-c:a", "pcm_s16le"))
	write := func(name string, b []byte) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, b, 0o644); err != nil {
			t.Fatal(err)
		}
		return path
	}
	for _, c := range []struct {
		path  string
		state State
		words string
	}{
		{write("cut.wav", whole[:len(whole)/2]), Held, "breaks off"},
		{write("empty.wav", nil), Failed, "empty"},
		{write("letter.mp3", []byte("Dear listeners, this is not a recording at all.\n")), Failed, "this is text"},
		{write("list.mp3", []byte("#EXTM3U\n/etc/hostname\n")), Failed, "this is a playlist"},
		{excerpt(t, dir, "silent.wav", 0, "-c:a", "pcm_s16le"), Failed, "silent"},
		{filepath.Join(dir, "nowhere.wav"), Failed, "no such file"},
	} {
		target := filepath.Join(dir, "out")
		o := levelInto(t, "rotation", c.path, target)
		if o.Verdict.State != c.state || !strings.Contains(o.Verdict.Reason, c.words) || strings.Contains(o.Verdict.Reason, dir) {
			t.Errorf("%s: %s, %q; want %s with %q", filepath.Base(c.path), o.Verdict.State, o.Verdict.Reason, c.state, c.words)
		}
		_, err := os.Stat(target)
		if kept := err == nil; kept != (o.After != nil) {
			t.Errorf("%s: a copy is left behind: %v", filepath.Base(c.path), kept)
		}
		os.Remove(target)
	}
}

func TestCancelledLeavesNothingBehind(t *testing.T) {
	dir := t.TempDir()
	source := excerpt(t, dir, "source.mp3", 1)
	ctx, cancel := context.WithCancelCause(context.Background())
	enough := errors.New("enough")
	cancel(enough)
	target := filepath.Join(dir, "out")
	if _, err := (&Engine{Media: media.Find()}).Level(ctx, source, Task{Profile: named(t, "rotation")}, target); !errors.Is(err, enough) {
		t.Errorf("got %v, want the cause of the cancelling", err)
	}
	if _, err := os.Stat(target); err == nil {
		t.Error("a scratch file is left behind")
	}
}
