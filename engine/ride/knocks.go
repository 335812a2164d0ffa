package ride

import (
	"math"
	"slices"
)

// What is a knock, a cough or a laugh and no voice, in dB and steps.
const (
	knockOver  = 6.0 // over all that is around it
	knockLong  = 4   // to either side of its loudest step that are its own
	knockSide  = 20  // after those, that are around it
	knockFoot  = 3.0 // over what is around it, its own steps are
	peakOver   = 9.0 // over the slow level, speech has no more
	phraseTop  = 0.7
	phraseOver = 3.0 // dB over that share of its steps, more does not count in the level of a phrase
)

// knocks are the moments in speech that are far louder than all that is said before and after: the ride leaves them to
// the compressor, since a fader that follows them pulls a voice down.
func knocks(level []float64, heard, spoken []bool) (found []Span) {
	const reach = knockSide / 2
	said := make([]float64, len(level))
	for i, l := range level {
		said[i] = silence
		if heard[i] && spoken[i] {
			said[i] = l
		}
	}
	top := loudestAround(nil, said, reach)
	side := func(at int) float64 {
		if at < -reach || at >= len(top)+reach {
			return silence
		}
		return top[min(max(at, 0), len(top)-1)]
	}
	for i, l := range said {
		around := max(side(i-knockLong-reach), side(i+knockLong+reach))
		if around <= silence || l < around+knockOver {
			continue
		}
		s := Span{i, i + 1}
		for s.From > max(0, i-knockLong+1) && level[s.From-1] > around+knockFoot {
			s.From--
		}
		for s.To < min(len(level), i+knockLong) && level[s.To] > around+knockFoot {
			s.To++
		}
		found = append(found, s)
	}
	return found
}

// withoutKnocks puts what is around a knock in its place. One that stands alone is not heard.
func (j *job) withoutKnocks(level []float64) {
	j.plain = slices.Clone(j.power)
	found := knocks(level, j.heard, j.spoken)
	for _, k := range found { // none is around another
		fill(j.plain[k.From:k.To], 0)
	}
	for _, k := range found {
		sum, count := 0.0, 0.0
		beside := func(from, to int) (near bool) {
			for i := max(0, from); i < min(to, len(j.heard)); i++ {
				if j.heard[i] && j.plain[i] > 0 {
					sum, count, near = sum+j.plain[i], count+1, true
				}
			}
			return near
		}
		before, after := beside(k.From-knockLong, k.From), beside(k.To, k.To+knockLong)
		if before && after {
			fill(j.plain[k.From:k.To], sum/count)
		} else {
			clear(j.heard[k.From:k.To])
		}
	}
}

// tamed are the powers without what juts out of speech: neither a cough nor a word that somebody shouts says how loud a
// voice is.
func (j *job) tamed(slow []float64) []float64 {
	out := slices.Clone(j.plain)
	for i, s := range j.spoken {
		if s && !math.IsNaN(slow[i]) {
			out[i] = min(out[i], power(slow[i]+peakOver))
		}
	}
	return out
}
