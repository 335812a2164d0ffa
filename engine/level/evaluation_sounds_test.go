package level_test

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

// rate is the sampling rate programmes are composed at, the one for which BS.1770 prints its filters.
const rate = 48000

// recordings are the real sounds the programmes are composed of: read speech of three people (Debian package
// pocketsphinx-testdata) and three pieces of music (asc-music). Nobody may change them.
type recordings struct {
	voices [][][]float32 // by person, by recording; mono, without the quiet before and after; steady, at −23 LUFS
	music  []audio.Block // stereo, each at −23 LUFS
}

const (
	talkFolder  = "/usr/share/pocketsphinx/test/data/"
	musicFolder = "/usr/share/games/asc/music/"
)

// people are the recordings of each voice.
var people = [][]string{
	{"librivox/*.wav"},
	{"cards/*.wav"},
	{"numbers.raw", "something.raw", "goforward.raw"},
}

var pieces = []string{"frontiers", "machine_wars", "time_to_strike"}

// real returns the recordings, decoded once.
func real(t testing.TB) recordings {
	t.Helper()
	r, err := decodeAll()
	if err != nil {
		t.Fatal(err)
	}
	return r
}

var decodeAll = sync.OnceValues(func() (r recordings, err error) {
	for _, patterns := range people {
		var voice [][]float32
		for _, pattern := range patterns {
			paths, err := filepath.Glob(talkFolder + pattern)
			if err != nil || len(paths) == 0 {
				return r, fmt.Errorf("no recordings at %s: the evaluation needs Debian's pocketsphinx-testdata", talkFolder+pattern)
			}
			for _, path := range paths {
				b, err := decode(path, 1)
				if err != nil {
					return r, err
				}
				voice = append(voice, evened(trimmed(b))[0])
			}
		}
		r.voices = append(r.voices, voice)
	}
	for _, name := range pieces {
		b, err := decode(musicFolder+name+".mp3", 2)
		if err != nil {
			return r, fmt.Errorf("%w (the evaluation needs Debian's asc-music)", err)
		}
		r.music = append(r.music, at(-23, b))
	}
	return r, nil
})

// decode reads the start of a file through FFmpeg's decoders and resampler.
func decode(path string, channels int) (audio.Block, error) {
	args := []string{"-v", "error", "-nostdin", "-t", decoded}
	if filepath.Ext(path) == ".raw" {
		args = append(args, "-f", "s16le", "-ar", "16000", "-ac", "1")
	}
	out, err := exec.Command("ffmpeg", append(args, "-i", path, "-map", "0:a:0", "-f", "f32le",
		"-ar", strconv.Itoa(rate), "-ac", strconv.Itoa(channels), "-")...).Output()
	if err != nil {
		return nil, fmt.Errorf("ffmpeg cannot decode %s (is it installed?): %w", path, err)
	}
	b := audio.NewBlock(channels, len(out)/4/channels)
	for i := range b.Frames() * channels {
		b[i%channels][i/channels] = math.Float32frombits(binary.LittleEndian.Uint32(out[4*i:]))
	}
	return b, nil
}

// evened makes a steady reader of one who is not: the mean power of what is heard within a second before and after
// is brought to the same everywhere, so that all differences of level in a programme are composed and known.
func evened(b audio.Block) audio.Block {
	const n, reach = rate / 100, 100
	powers := kPowers(b, n)
	heard := quantile(powers, 0.99) / 316 // 25 dB below the loudest
	gains := make([]float64, len(powers)+1)
	for i := range gains {
		sum, weight := 0.0, 0.0
		for k := max(0, i-reach); k < min(len(powers), i+reach); k++ {
			if powers[k] > heard {
				w := 1 + math.Cos(math.Pi*(float64(k-i)+0.5)/reach)
				sum, weight = sum+w*powers[k], weight+w
			}
		}
		if gains[i] = -lufs(sum / weight); weight == 0 && i > 0 {
			gains[i] = gains[i-1]
		}
	}
	return at(-23, shaped(b, func(s float64) float64 {
		i := min(int(s*rate/n), len(gains)-2)
		x := s*rate/n - float64(i)
		return gains[i] + (gains[i+1]-gains[i])*x
	}))
}

// trimmed cuts off what is more than 30 dB below the loudest tenth of a second, before and after.
func trimmed(b audio.Block) audio.Block {
	const n = rate / 10
	powers := kPowers(b, n)
	top := 0.0
	for _, p := range powers {
		top = max(top, p)
	}
	from, to := 0, len(powers)
	for from < to && powers[from] < top/1000 {
		from++
	}
	for to > from && powers[to-1] < top/1000 {
		to--
	}
	return b.Cut(make(audio.Block, len(b)), from*n, min(to*n, b.Frames()))
}

// at returns a copy of sound at a loudness in LUFS, by the meter of this evaluation.
func at(lufs float64, b audio.Block) audio.Block { return amplified(b, lufs-integrated(b)) }

func amplified(b audio.Block, decibels float64) audio.Block {
	return shaped(b, func(float64) float64 { return decibels })
}

// shaped returns a copy of sound with a gain in dB that is a function of time in seconds, taken every ms.
func shaped(b audio.Block, gain func(seconds float64) float64) audio.Block {
	out := audio.NewBlock(len(b), b.Frames())
	const hop = rate / 1000
	for from := 0; from < b.Frames(); from += hop {
		to := min(from+hop, b.Frames())
		g, next := linear(gain(float64(from)/rate)), linear(gain(float64(from+hop)/rate))
		for c, x := range b {
			for i := from; i < to; i++ {
				out[c][i] = float32(float64(x[i]) * (g + (next-g)*float64(i-from)/hop))
			}
		}
	}
	return out
}

func linear(decibels float64) float64 { return math.Pow(10, decibels/20) }

// stretch returns a copy of seconds of a piece from a second on; a piece that ends goes on from its start.
func stretch(b audio.Block, from, seconds float64) audio.Block {
	out := audio.NewBlock(len(b), int(seconds*rate))
	start := int(from * rate)
	for c, x := range out {
		for i := range x {
			x[i] = b[c][(start+i)%b.Frames()]
		}
	}
	return out
}

// added returns a + b, as long as a.
func added(a, b audio.Block) audio.Block {
	out := audio.NewBlock(len(a), a.Frames())
	for c, x := range out {
		copy(x, a[c])
		for i, v := range b[c%len(b)][:min(a.Frames(), b.Frames())] {
			x[i] += v
		}
	}
	return out
}

// spread puts one channel on several.
func spread(x []float32, channels int) audio.Block {
	b := make(audio.Block, channels)
	for c := range b {
		b[c] = x
	}
	return b
}

// joined puts sounds one after another.
func joined(parts ...audio.Block) audio.Block {
	out := make(audio.Block, len(parts[0]))
	for _, p := range parts {
		for c := range out {
			out[c] = append(out[c], p[c]...)
		}
	}
	return out
}

// hiss is noise whose spectrum falls by 3 dB an octave or so, as a room's does; tilt 0 is white.
func hiss(seed uint64, seconds, lufs, tilt float64) audio.Block {
	rng := rand.New(rand.NewPCG(seed, 7))
	b := audio.NewBlock(1, int(seconds*rate))
	low := 0.0
	for i := range b[0] {
		v := rng.NormFloat64()
		low += (v - low) * 0.02
		b[0][i] = float32((1-tilt)*v + tilt*6*low)
	}
	return at(lufs, b)
}
