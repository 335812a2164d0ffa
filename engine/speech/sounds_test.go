package speech

import (
	"encoding/binary"
	"fmt"
	"math"
	"math/rand/v2"
	"os/exec"
	"path/filepath"
	"strconv"
	"sync"
	"testing"

	"evenshelf/engine/audio"
)

// The recordings of the tests are of the Debian packages pocketsphinx-testdata (readings, card names and commands,
// some 45 s of several people) and asc-music (three pieces). No coefficient was fitted on them.
const testRate = 22050 // the sampling rate of asc-music

type recordings struct {
	speech map[string][]float32
	music  map[string][]float32
}

// heldOut returns them at testRate in mono. Tests must not change them.
func heldOut(t testing.TB) recordings {
	t.Helper()
	r, err := decoded()
	if err != nil {
		t.Fatal(err)
	}
	return r
}

var decoded = sync.OnceValues(func() (recordings, error) {
	r := recordings{map[string][]float32{}, map[string][]float32{}}
	const talk = "/usr/share/pocketsphinx/test/data/"
	for _, set := range []struct {
		to            map[string][]float32
		name, pattern string
		as            []string
	}{
		{r.speech, "reading", talk + "librivox/*.wav", nil},
		{r.speech, "cards", talk + "cards/*.wav", nil},
		{r.speech, "commands", talk + "*.raw", []string{"-f", "s16le", "-ar", "16000", "-ac", "1"}},
		{r.music, "frontiers", "/usr/share/games/asc/music/frontiers.mp3", nil},
		{r.music, "machine wars", "/usr/share/games/asc/music/machine_wars.mp3", nil},
		{r.music, "time to strike", "/usr/share/games/asc/music/time_to_strike.mp3", nil},
	} {
		paths, err := filepath.Glob(set.pattern)
		if err != nil || len(paths) == 0 {
			return r, fmt.Errorf("no recordings at %s: the tests need the Debian packages asc-music and pocketsphinx-testdata", set.pattern)
		}
		for _, path := range paths {
			x, err := decode(testRate, append(set.as, "-i", path)...)
			if err != nil {
				return r, err
			}
			set.to[set.name] = append(set.to[set.name], x...)
		}
	}
	return r, nil
})

// decode reads sound through FFmpeg, mixed down and brought to a rate.
func decode(rate int, input ...string) ([]float32, error) {
	args := append([]string{"-v", "error"}, input...)
	out, err := exec.Command("ffmpeg", append(args, "-map", "0:a:0", "-f", "f32le", "-ar", strconv.Itoa(rate), "-ac", "1", "-")...).Output()
	if err != nil {
		return nil, fmt.Errorf("ffmpeg %v (is it installed?): %w", input, err)
	}
	x := make([]float32, len(out)/4)
	for i := range x {
		x[i] = math.Float32frombits(binary.LittleEndian.Uint32(out[4*i:]))
	}
	return x, nil
}

// all joins the recordings of a kind, each at −23 dBFS, in the order of their names.
func all(sounds map[string][]float32, names ...string) (joined []float32) {
	for _, name := range names {
		joined = append(joined, scaled(sounds[name], -23)...)
	}
	return joined
}

var spoken = []string{"reading", "cards", "commands"}

// heard is the rms in dB of the tenths of a second within 30 dB of the loudest.
func heard(x []float32) float64 {
	const n = testRate / 10
	var powers []float64
	top := 0.0
	for at := 0; at+n <= len(x); at += n {
		p := 0.0
		for _, v := range x[at : at+n] {
			p += float64(v) * float64(v) / n
		}
		powers, top = append(powers, p), max(top, p)
	}
	sum, count := 0.0, 0.0
	for _, p := range powers {
		if p > top/1000 {
			sum, count = sum+p, count+1
		}
	}
	return 10 * math.Log10(sum/count)
}

// scaled returns x so that what is heard of it has a level in dBFS.
func scaled(x []float32, level float64) []float32 { return gain(x, level-heard(x)) }

func gain(x []float32, decibels float64) []float32 {
	out, g := make([]float32, len(x)), math.Pow(10, decibels/20)
	for i, v := range x {
		out[i] = float32(g * float64(v))
	}
	return out
}

// over adds two sounds; the shorter one is repeated.
func over(a, b []float32) []float32 {
	out := make([]float32, max(len(a), len(b)))
	for i := range out {
		out[i] = a[i%len(a)] + b[i%len(b)]
	}
	return out
}

// hiss is noise of a level in dBFS.
func hiss(seconds, level float64) []float32 {
	r := rand.New(rand.NewPCG(5, uint64(1000*seconds)))
	x := make([]float32, int(seconds*testRate))
	for i := range x {
		x[i] = float32(r.NormFloat64() * math.Pow(10, level/20))
	}
	return x
}

// course runs a detector over one channel at testRate.
func course(x []float32) Course { return courseOf(testRate, audio.Mono, audio.Block{x}) }

func courseOf(rate int, l audio.Layout, b audio.Block) Course {
	d := New(audio.Format{Rate: rate, Layout: l})
	d.Write(b)
	return d.Finish()
}

// shareOfSpeech is how much of the active part is taken for speech.
func (c Course) shareOfSpeech() float64 {
	on, speech := 0.0, 0.0
	for i, a := range c.Active {
		if a {
			on++
			if c.Speech[i] >= 0.5 {
				speech++
			}
		}
	}
	return speech / on
}

// windowsOfSpeech is the share of the windows of three seconds in the active part that are taken for speech, each by itself.
func windowsOfSpeech(x []float32) float64 {
	d := New(audio.Format{Rate: testRate, Layout: audio.Mono})
	d.Write(audio.Block{x})
	active, steps := d.Features()
	on, speech := 0.0, 0.0
	for i, f := range steps {
		if active[i] {
			on++
			if logOdds((*features)(f)) > 0 {
				speech++
			}
		}
	}
	return speech / on
}
