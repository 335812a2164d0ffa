package ride

import "math"

// How a step of the gain is made, in steps of time.
const (
	longestTurn = 4 // of a raised cosine in a pause
	afterPhrase = 2 // a fall waits for what rings on

	// Of one at a jump in music, where there is no pause to hide it in:
	shortestJump = 10
	longestJump  = 25
	jumpSlope    = 5.0 // dB/s between the two, on average
	jumpMet      = 80  // what is lowest within so many steps is there from the start
)

// seam is where two phrases meet, with [From, To) between them: nothing there is heard.
type seam struct {
	Span
	step bool // the gain steps in it; else it glides
	jump bool // in music
}

// edges writes the gains of steps to a curve, whose values lie on their edges. voices are the stretches within
// which gain is smooth.
func edges(g, gain []float64, voices []Span) {
	for _, v := range voices {
		for e := v.From; e <= v.To; e++ {
			g[e] = (gain[max(v.From, e-1)] + gain[min(v.To-1, e)]) / 2
		}
	}
}

// turn moves the gain across a pause from a to b, its values on either side: it holds the lower of them, rises
// late, so that it is up when the phrase begins, and falls early.
func (s seam) turn(g []float64, a, b float64) {
	from, to := s.From, s.To
	length, late := min(longestTurn, max(1, (to-from)/8)), min(afterPhrase, (to-from)/8)
	switch {
	case from == to && b < a: // there is no pause: turn where it is softer
		from--
	case from == to:
		to++
		b = g[to]
	}
	begin := max(from, to-length)
	if b < a {
		begin = from + late
	}
	for e := from; e <= to; e++ {
		g[e] = cosine(a, b, float64(e-begin)/float64(max(1, min(length, to-begin))))
	}
}

// jumpTurn moves the gain at a jump in music from a, its value before, as someone does who knows what comes: it is
// down before a tutti, at the lowest that follows soon, and rises when one is over. next is where the next seam is.
func (s seam) jumpTurn(g []float64, a float64, next int) {
	at := s.From
	if g[at] = g[at+1]; g[at] < a { // at the jump itself edges did not look across
		low := math.Inf(1)
		for e := min(next, at+jumpMet); e >= at; e-- {
			low = min(low, g[e])
			g[e] = low
		}
		from := max(0, at-turnLength(a-low))
		a = g[from]
		for e := from; e <= at; e++ {
			g[e] = cosine(a, low, float64(e-from)/float64(at-from))
		}
		return
	}
	to := min(next, at+turnLength(g[at]-a))
	b := g[to]
	for e := at; e <= to; e++ {
		g[e] = cosine(a, b, float64(e-at)/float64(to-at))
	}
}

// turnLength is how many steps a turn at a jump takes, for so many dB.
func turnLength(move float64) int {
	return int(clamp(StepsPerSecond*move/jumpSlope, shortestJump, longestJump))
}

// cosine goes from a to b as x goes from 0 to 1.
func cosine(a, b, x float64) float64 { return a + (b-a)*(1-math.Cos(math.Pi*clamp(x, 0, 1)))/2 }

// hold keeps the ends of a curve at the gain of what is heard first and last.
func hold(g []float64, first, last int) {
	fill(g[:first], g[first])
	fill(g[last+1:], g[last])
}

// floorLift returns how far the gain of a pause lies over the lowest that its neighbours have, as the mean over the
// pause, where that is most, and the step in its middle. A pause is where nothing is heard, and what is much softer for a
// moment than what is on both sides: it must not matter whether it was taken for a voice. What is below least with its
// gain is not audible, and does not count.
func floorLift(g, level []float64, heard []bool, least float64) (lift float64, at int) {
	const beside = StepsPerSecond * scrapLong
	top := loudestAround(nil, level, beside/2)
	quiet := make([]bool, len(level))
	for i, l := range level {
		quiet[i] = !heard[i] || l < min(top[max(0, i-beside/2)], top[min(len(top)-1, i+beside/2)])-scrapGap
	}
	runs(quiet, func(from, to int, on bool) {
		middle := (from + to) / 2
		if !on || to-from <= pause || from == 0 || to == len(quiet) || level[middle]+g[middle] < least {
			return
		}
		sum := (g[from] + g[to]) / 2
		for e := from + 1; e < to; e++ {
			sum += g[e]
		}
		lowest := min(g[from], g[to])
		for k := 1; k <= beside/2; k++ {
			if e := from - k; e >= 0 && !quiet[e] {
				lowest = min(lowest, g[e])
			}
			if e := to + k; e < len(quiet) && !quiet[e-1] {
				lowest = min(lowest, g[e])
			}
		}
		if l := sum/float64(to-from) - lowest; l > lift {
			lift, at = l, middle
		}
	})
	return lift, at
}

// seams are what lies between phrases: cuts, and the pauses that are meant.
func seams(p []phrase, cut []bool, silence float64) []seam {
	var found []seam
	for i := 1; i < len(p); i++ {
		gap := Span{p[i-1].To, p[i].From}
		if cut[i] || float64(gap.To-gap.From) >= silence*StepsPerSecond {
			found = append(found, seam{gap, cut[i], p[i].after})
		}
	}
	return found
}

// between returns the stretches that seams with a step leave.
func between(s []seam, n int) []Span {
	found := []Span{{0, n}}
	for _, s := range s {
		if s.step {
			at := (s.From + s.To) / 2
			found[len(found)-1].To = at
			found = append(found, Span{at, n})
		}
	}
	return found
}
