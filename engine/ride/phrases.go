package ride

import (
	"math"
	"slices"
)

// What may be cut, in steps.
const (
	pause     = 2    // without programme, a phrase ends
	gap       = 3    // what is no longer lies between words
	voiceSide = 10   // to either side of a change of voice in mid phrase that are compared
	voiceJump = 5.0  // dB between the two
	midPhrase = 3.0  // how many times the worth of a step at a pause a step within a phrase has to have
	midBreath = 2.0  // and one where there is no more than a gap between words
	sharpJump = 7.0  // dB, unless the level changes by this across it
	heldJump  = 5.5  // dB that voices are apart at least, where there is no pause between them
	heldTurn  = 4.5  // dB, if both go on for this long:
	heldLong  = 5.0  // s
	farthest  = 400  // phrases that may be of one voice
	scrapLong = 1.0  // s: what is shorter is no voice
	scrapGap  = 12.0 // dB, if it is softer by this than those before and after
	noiseLong = 3.0  // s: nor is what is shorter than this
	noiseGap  = 30.0 // dB, if it is softer by so much
	jumpHeld  = 50   // on both sides of a jump in music
	jumpSize  = 8    // dB, of a jump in music
	jumpSide  = 10   // right before and after it
)

// phrase is a stretch that is heard, with no cut in it.
type phrase struct {
	Span
	level float64 // dB, of its mean power
	long  float64 // s
	cost  float64 // of a cut before it, in worths of a step
	after bool    // it follows a jump in music: always a cut
	held  bool    // there is no pause before it
}

// voiced reports whether a phrase is long enough to be told by its level.
func (p phrase) voiced() bool { return p.long >= scrapLong }

// phrases splits what is heard at pauses, at changes of level in mid phrase where people speak, and at
// jumps where they do not.
func phrases(powers []float64, heard, spoken []bool, steps bool) []phrase {
	var found []phrase
	var sorted []float64
	r := sums(powers)
	add := func(from, to int, cost float64, after bool) {
		p := phrase{Span: Span{from, to}, cost: cost, after: after}
		sorted = append(sorted[:0], powers[from:to]...)
		slices.Sort(sorted)
		sum, most := 0.0, power(phraseOver)*sorted[int(phraseTop*float64(len(sorted)-1))]
		for _, v := range sorted {
			sum += min(v, most)
		}
		p.level = decibels(sum / float64(to-from))
		p.long = float64(to-from) / StepsPerSecond
		if n := len(found); n > 0 && from-found[n-1].To <= gap {
			end := found[n-1].To
			p.held = from-end <= pause
			if across := r.mean(from, min(from+voiceSide, to)) / r.mean(max(found[n-1].From, end-voiceSide), end); math.Abs(decibels(across)) < sharpJump {
				p.cost = max(cost, midBreath)
			}
		}
		found = append(found, p)
	}
	var from, last = -1, -1
	end := func() {
		if from < 0 {
			return
		}
		cost, after := 1.0, false
		for at := from + 1; at <= last; at++ {
			music := !spoken[at] && !spoken[at-1]
			if music && jumps(r, at, from, last+1) || !music && steps && changes(r, at, from, last+1) {
				add(from, at, cost, after)
				from, cost, after = at, midPhrase, music
			}
		}
		add(from, last+1, cost, after)
	}
	for i, on := range heard {
		if !on {
			continue
		}
		if from < 0 || i-last > pause {
			end()
			from = i
		}
		last = i
	}
	end()
	return found
}

// contrast is the difference of mean level between so many steps after an edge and so many before.
func contrast(r running, at, side, from, to int) float64 {
	return decibels(r.mean(at, min(at+side, to))) - decibels(r.mean(max(from, at-side), at))
}

// changes reports whether the voice changes at an edge of a phrase, by its level.
func changes(r running, at, from, to int) bool {
	return min(at-from, to-at) >= voiceSide/2 && math.Abs(contrast(r, at, voiceSide, from, to)) >= voiceJump &&
		steepest(r, at, from, to)
}

// jumps reports whether music jumps at an edge of a phrase, and stays there.
func jumps(r running, at, from, to int) bool {
	if min(at-from, to-at) < jumpHeld || math.Abs(contrast(r, at, jumpSide, from, to)) < jumpSize {
		return false
	}
	const half = jumpHeld / 2
	a, b := decibels(r.mean(at-2*half, at-half)), decibels(r.mean(at-half, at))
	c, d := decibels(r.mean(at, at+half)), decibels(r.mean(at+half, at+2*half))
	return max(min(c, d)-max(a, b), min(a, b)-max(c, d)) >= jumpSize && steepest(r, at, from, to)
}

// steepest reports whether the level changes nowhere within half a second more than at an edge.
func steepest(r running, at, from, to int) bool {
	const reach = StepsPerSecond / 2
	here := math.Abs(contrast(r, at, reach, from, to))
	for k := max(from+1, at-reach); k < min(to, at+reach+1); k++ {
		if c := math.Abs(contrast(r, k, reach, from, to)); c > here || c == here && k < at {
			return false
		}
	}
	return true
}

// voicesApart finds where one voice gives way to another of a different level: the cuts between phrases for which
//
//	Σ long·(level − mean of its voice)² + Σ cost·worth
//
// is least (a Potts model, solved exactly by dynamic programming but for voices of more than farthest phrases).
// It returns the phrases that begin with a cut.
func voicesApart(p []phrase, worth float64) []bool {
	cut := make([]bool, len(p))
	if len(p) == 0 {
		return cut
	}
	w, x, xx := make([]float64, len(p)+1), make([]float64, len(p)+1), make([]float64, len(p)+1)
	for i, f := range p {
		v := f.level - p[0].level
		w[i+1], x[i+1], xx[i+1] = w[i]+f.long, x[i]+f.long*v, xx[i]+f.long*v*v
	}
	spread := func(from, to int) float64 {
		d := x[to] - x[from]
		return xx[to] - xx[from] - d*d/(w[to]-w[from])
	}
	least, begin := make([]float64, len(p)+1), make([]int, len(p)+1)
	for to := 1; to <= len(p); to++ {
		least[to] = math.Inf(1)
		for from := to - 1; from >= max(0, to-farthest); from-- {
			sum := least[from] + spread(from, to)
			if from > 0 && !p[from].after {
				sum += worth * p[from].cost
			}
			if w[to]-w[from] < scrapLong && (p[from].held && !p[from].after || to < len(p) && p[to].held && !p[to].after) {
				continue
			}
			if sum < least[to] {
				least[to], begin[to] = sum, from
			}
			if p[from].after {
				break
			}
		}
	}
	var begins []int
	for to := len(p); to > 0; to = begin[to] {
		begins = append(begins, begin[to])
	}
	// A voice of more than farthest phrases was cut for that alone.
	end := len(p)
	for i, at := range begins {
		if at == 0 {
			break
		}
		gain := spread(begins[i+1], end) - spread(begins[i+1], at) - spread(at, end)
		if cut[at] = p[at].after || gain >= worth*p[at].cost; cut[at] {
			end = at
		}
	}
	return cut
}

// voicesOf joins the phrases of a voice.
func voicesOf(p []phrase, cut []bool) (voices []phrase) {
	for i, f := range p {
		if i == 0 || cut[i] {
			voices = append(voices, f)
			continue
		}
		v := &voices[len(voices)-1]
		v.level = (v.level*v.long + f.level*f.long) / (v.long + f.long)
		v.long, v.To = v.long+f.long, f.To
	}
	return voices
}

// held takes back the cuts within a sentence that are too small for a change of voice: people stress what they say.
func held(p []phrase, cut []bool) []bool {
	voices, v := voicesOf(p, cut), 0
	for i := range p {
		if i > 0 && cut[i] {
			v++
			a, b, least := voices[v-1], voices[v], heldJump
			if min(a.long, b.long) >= heldLong {
				least = heldTurn
			}
			cut[i] = !p[i].held || p[i].after || math.Abs(a.level-b.level) >= least
		}
	}
	return cut
}

// scraps returns what was cut out as a voice, but is too short and too far from those on both sides: below them a breath
// or noise, over them a cough or a knock.
func scraps(p []phrase, cut []bool) (found []Span) {
	voices := voicesOf(p, cut)
	for i, v := range voices {
		under, over := math.Inf(1), math.Inf(1)
		for _, k := range []int{i - 1, i + 1} {
			if k >= 0 && k < len(voices) {
				under, over = min(under, voices[k].level-v.level), min(over, v.level-voices[k].level)
			}
		}
		if len(voices) > 1 && (v.long < scrapLong && (under >= scrapGap || over >= knockOver) || v.long < noiseLong && under >= noiseGap) {
			found = append(found, v.Span)
		}
	}
	return found
}
