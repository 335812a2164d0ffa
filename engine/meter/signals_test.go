package meter

import (
	"fmt"
	"math"

	"evenshelf/engine/audio"
)

// rates are those the standards' signals are tried at.
var rates = []int{32000, 44100, 48000, 96000}

// depths are those the standards' signals are held at.
var depths = []depth{16, 24, 0}

// depth is the bits a file has for a sample; 0 is float32.
type depth int

func (d depth) String() string {
	if d == 0 {
		return "float"
	}
	return fmt.Sprintf("%d-bit", int(d))
}

// hold changes b into what a file of that depth gives back, and returns it: 16-bit with triangular dither
// of its own in every channel, as careful software writes it, 24-bit rounded.
//
//go:norace
func (d depth) hold(b audio.Block) audio.Block {
	if d == 0 {
		return b
	}
	full := float64(int64(1) << (d - 1))
	random := uint64(1) // a linear congruence, Knuth's constants
	for c := range b {
		for i, v := range b[c] {
			x := float64(v) * full
			if d == 16 {
				random = random*6364136223846793005 + 1442695040888963407
				x += float64(random>>40)/(1<<24) - float64(random>>16&(1<<24-1))/(1<<24)
			}
			b[c][i] = float32(max(-full, min(full-1, math.RoundToEven(x))) / full)
		}
	}
	return b
}

// front51 is 5.0 in the order of the channel mask: L R C Ls Rs.
var front51 = audio.UsualLayout(5)

// part is a stretch of a tone: its length and the peak of each channel in dBFS.
type part struct {
	seconds float64
	level   float64
}

const silent = -1000 // dBFS, below anything a float32 holds

// tone returns parts of one continuous sine, alike in every channel.
//
//go:norace
func tone(rate, hz, channels int, parts ...part) audio.Block {
	total := 0.0
	for _, p := range parts {
		total += p.seconds
	}
	b := audio.NewBlock(channels, int(math.Round(total*float64(rate))))
	second := make([]float64, rate) // whole hertz repeat after it
	for i := range second {
		second[i] = math.Sin(2 * math.Pi * float64(hz*i%rate) / float64(rate))
	}
	end, i := 0.0, 0
	for _, p := range parts {
		end += p.seconds
		amplitude := math.Pow(10, p.level/20)
		for ; i < int(math.Round(end*float64(rate))); i++ {
			v := float32(amplitude * second[i%rate])
			for c := range b {
				b[c][i] = v
			}
		}
	}
	return b
}

// repeat returns parts n times over.
func repeat(n int, parts ...part) (all []part) {
	for range n {
		all = append(all, parts...)
	}
	return all
}

// scale multiplies one channel.
func scale(x []float32, factor float64) {
	for i := range x {
		x[i] = float32(float64(x[i]) * factor)
	}
}

// measure returns the reading of a block, written in one piece.
func measure(t fataler, rate int, layout audio.Layout, b audio.Block) (Reading, Timeline) {
	t.Helper()
	m := newMeter(t, rate, layout)
	m.Write(b)
	return m.Finish()
}

func newMeter(t fataler, rate int, layout audio.Layout) *Meter {
	t.Helper()
	m, err := New(audio.Format{Rate: rate, Layout: layout}, audio.OneChannel)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// near fails unless got is within tolerance of want.
func near[F ~float64](t fataler, what string, got F, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(float64(got)-want) <= tolerance) {
		t.Errorf("%s: got %.4f, want %.4f ± %g", what, float64(got), want, tolerance)
	}
}

// fataler is a *testing.T or a *rapid.T.
type fataler interface {
	Helper()
	Errorf(format string, args ...any)
	Fatal(args ...any)
}
