package ride

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// reading is a programme of whole recordings one after the other, each with the breath, the room and the last sounds it
// has, at levels of so many dB; the recordings of less than 2.5 s are left out.
func reading(t testing.TB, rest, noise float64, levels ...float64) *programme {
	files := recordings(t, "speech.json")
	var names []string
	for _, name := range slices.Sorted(keys(files)) {
		if len(files[name]) > 5*fineSteps/2 {
			names = append(names, name)
		}
	}
	p := &programme{noise: power(noise)}
	for i, level := range levels {
		read, from := files[names[i%len(names)]], len(p.power)
		m := mean(read)
		for _, v := range read {
			p.power = append(p.power, v/m*power(level))
		}
		p.turns = append(p.turns, turn{Span{from, len(p.power)}, i})
		p.rest(rest)
	}
	return p
}

// cough adds a quarter of a second of noise that swells to an amplitude and falls again.
func (p *programme) cough(at, amplitude float64) {
	const long = fineSteps / 4
	for i := range long {
		swell := amplitude * math.Sin(math.Pi*(float64(i)+0.5)/long) * math.Sin(math.Pi*(float64(i)+0.5)/long)
		p.power[int(at*fineSteps)+i] += swell * swell
	}
}

func again(n int, levels ...float64) []float64 { return slices.Repeat(levels, n) }

// The last sounds of a word and the noise after them are no third voice: they are not brought up to the others, the
// pause after them has the gain of its louder neighbour, and how soft the noise is moves nothing.
func TestTheTailOfAWordIsNoVoice(t *testing.T) {
	far := again(2, -26, -26, -44, -26, -26, -44, -26, -44)
	for _, c := range []struct {
		name   string
		noise  float64
		levels []float64
	}{
		{"a whisper, little noise", -75, again(8, -26, -50)},
		{"far, much noise", -60, far},
		{"far, noise", -66, far},
		{"far, little noise", -72, far},
		{"far, next to no noise", -90, far},
	} {
		for _, style := range []string{"talk", "transmitter"} {
			rng := rand.New(rand.NewPCG(1, 21))
			p := reading(t, 0.7, c.noise, c.levels...)
			course := p.course(rng)
			course.Speech = make([]float32, len(course.Level))
			fill(course.Speech, 0.9)
			r := Solve(course, styles[style])
			_, gain := p.ridden(r.Gain)
			median := func(s Span) float64 {
				sorted := slices.Sorted(slices.Values(gain[s.From:s.To]))
				return sorted[len(sorted)/2]
			}
			worst, at := 0.0, 0.0
			for i, u := range p.turns[1:] {
				before := p.turns[i].Span
				least := min(median(before), median(u.Span))
				for k := before.To + 2*fineSteps/5; k < u.From-fineSteps/10; k++ {
					if over := gain[k] - least; over > worst {
						worst, at = over, float64(k)/fineSteps
					}
				}
			}
			lowest, highest := slices.Min(r.Gain), slices.Max(r.Gain)
			t.Logf("%s, %s: a pause is %.1f dB over its lower neighbour at most, at %.1f s; gain %.1f … %.1f dB, lift %.1f dB at %.1f s",
				c.name, style, worst, at, lowest, highest, r.FloorLift, r.FloorAt)
			if worst > 3 || float64(highest-lowest) > c.levels[0]-slices.Min(c.levels)+8 {
				t.Errorf("%s, %s: a pause is %.1f dB over its lower neighbour, at %.1f s; gain %.1f … %.1f dB", c.name, style, worst, at, lowest, highest)
			}
		}
	}
}

// A cough, a knock or a laugh is left to the compressor: the ride does not pull down what is around it.
func TestACoughMovesNobody(t *testing.T) {
	for style, most := range map[string]float64{"talk": 1.5, "transmitter": 2.5} { // one of 2 s follows what is no louder than a stressed word
		s := styles[style]
		s.Range, s.Even = 5, true
		solve := func(amplitude float64, at ...float64) Curve {
			p := reading(t, 0.7, -72, again(10, -26)...)
			for _, a := range at {
				p.cough(a, amplitude)
			}
			c := p.course(rand.New(rand.NewPCG(1, 22)))
			c.Speech = make([]float32, len(c.Level))
			fill(c.Speech, 0.9)
			return Solve(c, s).Gain
		}
		without := solve(0)
		for _, where := range [][]float64{{23}, {8.2, 15.3, 22.4}, {4.1}, {0.1}, {50.6}} {
			for _, amplitude := range []float64{0.15, 0.3, 0.5, 0.6, 0.9} {
				with, worst, at := solve(amplitude, where...), 0.0, 0
				moved := make([]float64, len(with))
				for i, g := range with {
					moved[i] = float64(g - without[i])
				}
				all := slices.Sorted(slices.Values(moved))[len(moved)/2] // the gain that follows the ride answers to that
				for i, m := range moved {
					if d := math.Abs(m - all); d > worst {
						worst, at = d, i
					}
				}
				if worst > most {
					t.Errorf("%s: coughs of %v at %v s move the gain by %.1f dB at %.1f s", style, amplitude, where, worst, float64(at)/10)
				}
			}
		}
	}
}

// One reader reads some sentences louder than others. The gain does not step for that without a pause to do it in.
func TestNoStepWithinASentence(t *testing.T) {
	const short, least = 3, 5.5 // steps of time that are no pause, dB
	for _, levels := range [][]float64{again(10, -26), again(8, -26, -50), again(2, -26, -26, -44, -26, -26, -44, -26, -44)} {
		for _, style := range []string{"talk", "transmitter", "film"} {
			s := styles[style]
			s.Range, s.Step = 4, 15
			c := reading(t, 0.7, -72, levels...).course(rand.New(rand.NewPCG(1, 23)))
			c.Speech = make([]float32, len(c.Level))
			fill(c.Speech, 0.9)
			r := Solve(c, s)
			for _, v := range r.Steps {
				before, after := r.Gain[max(0, v.From-3)], r.Gain[min(len(c.Level), v.To+3)]
				if v.To-v.From < short && math.Abs(float64(after-before)) < least {
					t.Errorf("%s, %v: the gain steps at %.1f s, %.1f to %.1f dB", style, levels[:3], float64(v.From)/10, before, after)
				}
			}
		}
	}
}

// The lift of a pause is told by what is soft there, whatever was taken for a voice, and in the middle of it.
func TestLiftOfAPauseIsFoundByItsLevel(t *testing.T) {
	for _, c := range []struct {
		name    string
		noise   float64 // LUFS
		over    float64 // dB, gain of the pause over the neighbours'
		want    float64
		from    int // the pause
		to      int
		within  float64 // dB
		nowhere bool
	}{
		{"a false voice", -60, 20, 20, 40, 50, 1, false},
		{"a long one", -50, 12, 12, 30, 60, 1, false},
		{"none", -50, 0, 0, 40, 50, 0.1, true},
		{"no noise", -110, 20, 0, 40, 50, 0.1, true},
	} {
		level, g, heard := make([]float64, 100), make([]float64, 101), make([]bool, 100)
		fill(heard, true)
		fill(heard[c.from:c.to], c.to-c.from < 15) // what is short was taken for a voice
		fill(level, -20)
		fill(level[c.from:c.to], c.noise)
		fill(g[c.from:c.to+1], c.over)
		lift, at := floorLift(g, level, heard, -65)
		if math.Abs(lift-c.want) > c.within+0.15*c.want || !c.nowhere && math.Abs(float64(at)-float64(c.from+c.to)/2) > 1.5 {
			t.Errorf("%s: %.1f dB at step %d, want %.1f in the middle of %d … %d", c.name, lift, at, c.want, c.from, c.to)
		}
	}
}
