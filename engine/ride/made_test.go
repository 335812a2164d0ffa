package ride

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strings"
	"testing"
)

// fineSteps is the grid programmes are made and judged on, steps a second.
const fineSteps = 100

// recordings reads what testdata/levels.py wrote: the course of real recordings as powers.
func recordings(t testing.TB, file string) map[string][]float64 {
	t.Helper()
	b, err := os.ReadFile("testdata/" + file)
	if err != nil {
		t.Fatal(err)
	}
	var hundredths map[string][]int
	if err := json.Unmarshal(b, &hundredths); err != nil {
		t.Fatal(err)
	}
	out := map[string][]float64{}
	for name, levels := range hundredths {
		for _, l := range levels {
			out[name] = append(out[name], math.Pow(10, float64(l)/1000))
		}
	}
	return out
}

// voice is a speaker: what a person read, one recording after the other without its noise and the silence around it,
// at a mean power of 1.
func voice(t testing.TB, reader string) []float64 {
	var all []float64
	files := recordings(t, "speech.json")
	for _, name := range slices.Sorted(keys(files)) {
		if !strings.HasPrefix(name, reader) {
			continue
		}
		p := files[name]
		sorted := slices.Sorted(slices.Values(p))
		noise, mean := 2*sorted[len(p)/20], 0.0
		for i := range p {
			p[i] = max(p[i]-noise, 1e-12)
		}
		from, to := 0, len(p)
		for p[from] < sorted[len(p)/2]/10 {
			from++
		}
		for p[to-1] < sorted[len(p)/2]/10 {
			to--
		}
		p = p[from:to]
		for _, v := range p {
			mean += v / float64(len(p))
		}
		for _, v := range p {
			all = append(all, v/mean)
		}
		all = append(all, make([]float64, 40)...)
	}
	return all
}

func keys[K comparable, V any](m map[K]V) func(func(K) bool) {
	return func(yield func(K) bool) {
		for k := range m {
			if !yield(k) {
				return
			}
		}
	}
}

// turn is a stretch of a programme by one voice, in fine steps.
type turn struct {
	Span
	who int
}

// programme is a made recording.
type programme struct {
	power []float64 // fine
	turns []turn
	noise float64
}

// say appends a turn of about so many seconds by a voice of a level in dB, from somewhere in what it can say.
func (p *programme) say(rng *rand.Rand, voice []float64, who int, seconds, level float64) {
	at := rng.IntN(len(voice))
	for voice[at] < 0.03 { // begin with a sound
		at = (at + 1) % len(voice)
	}
	from := len(p.power)
	for k := 0; k < int(seconds*fineSteps) || voice[(at+k-1)%len(voice)] < 0.03; k++ {
		p.power = append(p.power, voice[(at+k)%len(voice)]*power(level))
	}
	p.turns = append(p.turns, turn{Span{from, len(p.power)}, who})
}

// rest appends a pause.
func (p *programme) rest(seconds float64) {
	p.power = append(p.power, make([]float64, int(math.Round(seconds*fineSteps)))...)
}

// course returns the programme, with its noise, on the grid of the solver.
func (p *programme) course(rng *rand.Rand) Course {
	var c Course
	for i := range p.power { // of noise of 5 kHz in 10 ms
		p.power[i] += p.noise * max(0.1, 1+0.14*rng.NormFloat64())
	}
	n := fineSteps / StepsPerSecond
	for len(p.power)%n > 0 {
		p.power = append(p.power, p.noise)
	}
	for i := 0; i < len(p.power); i += n {
		c.Level = append(c.Level, float32(decibels(sums(p.power[i:i+n]).mean(0, n))))
	}
	return c
}

// ridden returns the programme with a gain, and the gain in dB, on the fine grid.
func (p *programme) ridden(g Curve) (powers, gain []float64) {
	lin := make([]float64, len(p.power))
	g.Fill(lin, 0, fineSteps)
	gain = make([]float64, len(lin))
	powers = make([]float64, len(lin))
	for i, l := range lin {
		gain[i] = 20 * math.Log10(l)
		powers[i] = p.power[i] * l * l
	}
	return powers, gain
}

// coarse powers from fine ones.
func coarse(fine []float64) []float64 {
	n := fineSteps / StepsPerSecond
	var out []float64
	for i := 0; i+n <= len(fine); i += n {
		out = append(out, sums(fine[i:i+n]).mean(0, n))
	}
	return out
}

// loudnessOf is the gated loudness of all turns of a voice.
func (p *programme) loudnessOf(who int, powers []float64) float64 {
	var all []float64
	for _, t := range p.turns {
		if t.who == who {
			all = append(all, powers[t.From:t.To]...)
		}
	}
	return integrated(coarse(all))
}

// spread is a summary of values.
type summary struct{ mean, p90, max float64 }

func summarise(v []float64) summary {
	if len(v) == 0 {
		return summary{}
	}
	slices.Sort(v)
	return summary{sums(v).mean(0, len(v)), v[(len(v)-1)*9/10], v[len(v)-1]}
}

// settling returns how long after the start of each turn the gain comes to within 1 dB of its median in that turn, s.
func (p *programme) settling(gain []float64) summary {
	var times []float64
	for _, t := range p.turns[1:] {
		sorted := slices.Sorted(slices.Values(gain[t.From:t.To]))
		median := sorted[len(sorted)/2]
		at := t.From
		for at < t.To && math.Abs(gain[at]-median) > 1 {
			at++
		}
		times = append(times, float64(at-t.From)/fineSteps)
	}
	return summarise(times)
}

// slew returns how fast the gain moves within turns, half a second away from their ends, dB/s.
func (p *programme) slew(gain []float64) summary {
	var rates []float64
	for _, t := range p.turns {
		for i := t.From + fineSteps/2; i < t.To-fineSteps/2; i++ {
			rates = append(rates, math.Abs(gain[i]-gain[i-1])*fineSteps)
		}
	}
	return summarise(rates)
}

// overNeighbour returns how far the mean gain in the pauses between turns lies over the lower of those beside.
func (p *programme) overNeighbour(gain []float64) summary {
	var over []float64
	for i, t := range p.turns[1:] {
		from, to := p.turns[i].To, t.From
		if to-from < fineSteps/5 {
			continue
		}
		sum := 0.0
		for _, g := range gain[from:to] {
			sum += g
		}
		over = append(over, sum/float64(to-from)-min(gain[from-1], gain[to]))
	}
	return summarise(over)
}

// The settings of the built-in profiles; for talk with 20 dB²·s for a step, which cuts within a turn less often than 15.
var styles = map[string]Settings{
	"concert":     {Speed: Slow, Range: 15, Deadband: 3, Lift: 12, Cut: 8, Silence: 3},
	"film":        {Speed: Medium, Speech: true, Range: 8, Deadband: 1, Lift: 18, Cut: 15, Step: 25, Silence: 3},
	"gentle film": {Speed: Medium, Speech: true, Range: 13, Deadband: 2, Keep: 0.3, Lift: 18, Cut: 15, Step: 25, Silence: 3},
	"rotation":    {Speed: Slow, Range: 10, Deadband: 2, Lift: 15, Cut: 10, Silence: 3},
	"talk":        {Speed: Medium, Speech: true, Range: 6, Lift: 20, Cut: 20, Step: 20, Silence: 3},
	"transmitter": {Speed: Fast, Range: 5, Lift: 20, Cut: 20, Step: 15, Silence: 3},
}

// conversation is 24 turns of about 7 s by two voices, the second softer.
func conversation(t testing.TB, rng *rand.Rand, difference, shortest, longest float64) *programme {
	a, b := voice(t, "sense"), voice(t, "00")
	p := &programme{noise: power(-65)}
	for i := range 24 {
		if i > 0 {
			p.rest(shortest + (longest-shortest)*rng.Float64())
		}
		if seconds := 5 + 4*rng.Float64(); i%2 == 0 {
			p.say(rng, a, 0, seconds, -20)
		} else {
			p.say(rng, b, 1, seconds, -20-difference)
		}
	}
	return p
}

// wider returns powers whose differences in level are stretched about their loudness until their loudness range is
// as asked for: real music, played with more contrast.
func wider(powers []float64, lra float64) []float64 {
	middle := integrated(powers)
	out := make([]float64, len(powers))
	low, high := 0.2, 8.0
	for range 30 {
		by := (low + high) / 2
		for i, p := range powers {
			out[i] = power(middle + by*(decibels(p)-middle))
		}
		if new(ranger).of(out) < lra {
			low = by
		} else {
			high = by
		}
	}
	return out
}

// order is Spearman's rank correlation of the loudness of blocks of 3 s before and after, of those above the gate.
func order(before, after []float64) float64 {
	var x, y []float64
	a, b := sums(before), sums(after)
	for i := 0; i+window <= len(before); i += window {
		if p := a.mean(i, i+window); p > power(gate) {
			x, y = append(x, p), append(y, b.mean(i, i+window))
		}
	}
	ranks := func(v []float64) []float64 {
		at := make([]int, len(v))
		for i := range at {
			at[i] = i
		}
		slices.SortFunc(at, func(i, k int) int {
			if v[i] < v[k] {
				return -1
			}
			return 1
		})
		r := make([]float64, len(v))
		for rank, i := range at {
			r[i] = float64(rank)
		}
		return r
	}
	rx, ry, sum := ranks(x), ranks(y), 0.0
	for i := range rx {
		sum += (rx[i] - ry[i]) * (rx[i] - ry[i])
	}
	n := float64(len(rx))
	return 1 - 6*sum/(n*(n*n-1))
}

// levels of powers as a course.
func courseOf(powers []float64) Course {
	c := Course{Level: make([]float32, len(powers))}
	for i, p := range powers {
		c.Level[i] = float32(decibels(p))
	}
	return c
}

// riddenSteps are powers on the grid of the solver with a gain.
func riddenSteps(powers []float64, g Curve) []float64 {
	out := make([]float64, len(powers))
	for i, p := range powers {
		out[i] = p * power(float64(g[i]+g[i+1])/2)
	}
	return out
}
