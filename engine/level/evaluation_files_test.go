package level_test

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"testing"

	"evenshelf/engine/audio"
)

// formats takes one sound through the formats that can be delivered.
func (b bench) formats(t *testing.T) {
	p := programme{name: "music", sound: joined(at(-30, stretch(b.music[0], 50, 6)), at(-24, stretch(b.music[0], 62, 4)))}
	float := b.written(t, p)
	defer os.Remove(float)
	music, both := []string{"rotation"}, []string{"rotation", "transmitter"}
	for _, c := range []struct {
		name     string
		lossy    bool
		profiles []string
		args     []string
	}{
		{"16 bits 22.05 kHz.wav", false, music, []string{"-c:a", "pcm_s16le", "-ar", "22050"}},
		{"16 bits 44.1 kHz.wav", false, both, []string{"-c:a", "pcm_s16le", "-ar", "44100"}},
		{"24 bits 48 kHz.wav", false, music, []string{"-c:a", "pcm_s24le", "-ar", "48000"}},
		{"24 bits 96 kHz.wav", false, music, []string{"-c:a", "pcm_s24le", "-ar", "96000"}},
		{"16 bits 48 kHz.flac", false, music, []string{"-c:a", "flac", "-sample_fmt", "s16", "-ar", "48000"}},
		{"192 kbit.mp3", true, both, []string{"-c:a", "libmp3lame", "-b:a", "192k", "-ar", "44100"}},
		{"160 kbit.m4a", true, music, []string{"-c:a", "aac", "-b:a", "160k"}},
		{"96 kbit.opus", true, music, []string{"-c:a", "libopus", "-b:a", "96k"}},
	} {
		for _, name := range c.profiles {
			source := filepath.Join(b.dir, name+", "+c.name)
			if out, err := exec.Command("ffmpeg", append(append([]string{"-v", "error", "-nostdin", "-y", "-i", float}, c.args...), source)...).CombinedOutput(); err != nil {
				t.Fatalf("ffmpeg: %v\n%s", err, out)
			}
			r := b.level(t, programme{name: c.name, sound: p.sound}, source, named(t, name))
			if r.out == nil {
				b.note(failedRow, r.on(), 1)
				continue
			}
			over := truePeak(r.out) - float64(r.profile.Ceiling)
			foreseen := 0.0
			if r.Foreseen != nil {
				foreseen = math.Abs(float64(r.Foreseen.Integrated - r.After.Integrated))
			}
			off := math.Abs(secondOpinion(t, r.path) - float64(r.profile.Target))
			b.line("Formats", "| %s | %.3f | %+.3f | %+.3f | %d |", r.on(), foreseen, off, over, r.Renders)
			if c.lossy {
				b.note(foreseenLossy, r.on(), foreseen)
			} else {
				b.note(foreseenRow, r.on(), foreseen)
				b.note(peakRow, r.on(), over)
				b.note(lengthRow, r.on(), math.Abs(float64(r.After.Frames-r.Before.Frames)))
				if r.reachable() {
					b.note(opinionRow, r.on(), off)
				}
			}
			b.again(t, r)
			r.done()
			os.Remove(source)
		}
	}
}

// worstSeconds compares real recordings, as they are and levelled: of all seconds, every 100 ms, of which at least
// eight tenths are within 20 LU of the recording's loudness, the one whose loudness is furthest from it.
func (b bench) worstSeconds(t *testing.T) {
	type recording struct {
		path, profile string
		channels      int
	}
	var all []recording
	for _, name := range pieces {
		all = append(all, recording{musicFolder + name + ".mp3", "rotation", 2}, recording{musicFolder + name + ".mp3", "concert", 2})
	}
	for _, patterns := range people {
		for _, pattern := range patterns {
			paths, _ := filepath.Glob(talkFolder + pattern) // decoding has found them all before
			for _, path := range paths {
				all = append(all, recording{path, "talk", 1})
			}
		}
	}
	for _, x := range all {
		sound, err := decode(x.path, x.channels)
		if err != nil {
			t.Fatal(err)
		}
		if most := 70 * rate; sound.Frames() > most { // of the pieces of music
			sound = sound.Cut(make(audio.Block, len(sound)), 0, most)
		}
		p := programme{name: filepath.Base(x.path), sound: sound}
		if p.seconds() < 2.5 { // a word or two
			continue
		}
		source := b.written(t, p)
		r := b.level(t, p, source, named(t, x.profile))
		os.Remove(source)
		if r.out == nil {
			continue
		}
		in, out := kPowers(p.sound, step), kPowers(r.out, step)
		before, whole := windows(in, 10), integratedOf(in)
		after, now := windows(out, 10), integratedOf(out)
		worstBefore, worstAfter := 0.0, 0.0
		for i := range before {
			if len(above(in[i:i+10], power(whole-20))) >= 8 {
				worstBefore = max(worstBefore, math.Abs(lufs(before[i])-whole))
				worstAfter = max(worstAfter, math.Abs(lufs(after[i])-now))
			}
		}
		b.line("Worst second", "| %s | %.0f | %s | %.1f | %.1f | %s → %s |", p.name, p.seconds(), x.profile, worstBefore, worstAfter,
			talkRange.number(loudnessRange(in)), talkRange.number(loudnessRange(out)))
		r.done()
	}
}

// determinism levels the same twice, and on one processor and on two.
func (b bench) determinism(t *testing.T) {
	c := newComposer(b.recordings, 99)
	for i := range 3 {
		c.say(speech, i%2, -20-14*float64(i%2), 5)
		c.pause(0.5, 1)
	}
	p := c.on("conversation", hiss(2, c.now(), -65, 0.5), 1)
	source := b.written(t, p)
	defer os.Remove(source)
	usual := runtime.GOMAXPROCS(0)
	defer runtime.GOMAXPROCS(usual)
	names := []string{"talk", "transmitter", "film"}
	if !thorough {
		names = names[:1]
	}
	for _, name := range names {
		var first []byte
		for i, processors := range []int{1, 2, 2} {
			runtime.GOMAXPROCS(processors)
			r := b.level(t, p, source, named(t, name))
			if r.out == nil {
				t.Fatalf("%s: %s", r.on(), r.Verdict.Reason)
			}
			bytesNow := content(t, r.path)
			r.done()
			if i == 0 {
				first = bytesNow
				continue
			}
			b.note(sameRow, fmt.Sprintf("%s, time %d", r.on(), i+1), count(!bytes.Equal(first, bytesNow)))
		}
	}
}
