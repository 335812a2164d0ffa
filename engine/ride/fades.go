package ride

import (
	"math"
	"slices"
)

// What counts as a fade, in seconds and dB.
const (
	shortestFade = 2
	longestFade  = 45   // and no more than a quarter of the recording: longer, it is music that swells
	besideFade   = 15   // looked at on its loud side, at least
	fadeDrop     = 10.0 // it falls by this at least
	fadeDepth    = 40.0 // what is further below the loudest second says no more about its law
	fadeBetter   = 1.2  // times the misfit that no fade, and one that is over at once, have at least
)

// fadeLaws are the courses a fade in takes, in dB, as x goes from 0 to 1: falls of so many dB, even in dB, and
// those even in amplitude and along a cosine.
var fadeLaws = []func(x float64) float64{
	evenFade(15), evenFade(25), evenFade(40), evenFade(60),
	func(x float64) float64 { return decibels(x * x) },
	func(x float64) float64 { x = (1 - math.Cos(math.Pi*x)) / 2; return decibels(x * x) },
}

func evenFade(drop float64) func(float64) float64 {
	return func(x float64) float64 { return drop * (x - 1) }
}

// fadesOf finds a fade at the start and one at the end.
func fadesOf(power []float64) []Span {
	n := len(power)
	var found []Span
	if to := fadeIn(power); to > 0 {
		found = append(found, Span{0, to})
	}
	back := slices.Clone(power)
	slices.Reverse(back)
	if to := fadeIn(back); to > 0 && (len(found) == 0 || found[0].To < n-to) {
		found = append(found, Span{n - to, n})
	}
	return found
}

// fadeIn returns the step at which a fade in ends, 0 if there is none: there is one if the levels of the first
// seconds follow a fade's law to a steady level much better than they follow a steady level, or two of them.
func fadeIn(power []float64) int {
	first := slices.IndexFunc(power, func(p float64) bool { return decibels(p) > gate })
	if first < 0 {
		return 0
	}
	r := sums(power)
	var levels []float64
	for at := first; at+StepsPerSecond <= len(power) && len(levels) < longestFade+besideFade; at += StepsPerSecond {
		levels = append(levels, decibels(r.mean(at, at+StepsPerSecond)))
	}
	if len(levels) < 2*shortestFade {
		return 0
	}
	top := slices.Max(levels)
	for i, l := range levels {
		levels[i] = max(l, top-fadeDepth)
	}
	longest := min(longestFade, len(levels)-shortestFade, len(power)/StepsPerSecond/4)
	best, most := 0, 0.0
	for length := shortestFade; length <= longest; length++ {
		around := levels[:min(len(levels), length+besideFade)]
		steady := sums(around[length:]).mean(0, len(around)-length)
		if (levels[0]+levels[1])/2 > steady-fadeDrop {
			continue
		}
		plain, fade := misfit(around, nil, 0), math.Inf(1)
		for at := 1; at < len(around); at++ {
			plain = min(plain, misfit(around[:at], nil, 0)+misfit(around[at:], nil, 0))
		}
		for _, law := range fadeLaws {
			fade = min(fade, misfit(around, law, length))
		}
		if better := plain / fade; better > fadeBetter && float64(len(around))*math.Log(better) > most {
			best, most = length, float64(len(around))*math.Log(better)
		}
	}
	if best == 0 {
		return 0
	}
	return first + best*StepsPerSecond
}

// misfit is the sum of squares by which levels miss a steady level after a fade of so many seconds.
func misfit(levels []float64, law func(float64) float64, length int) float64 {
	sum, squares := 0.0, 0.0
	for i, l := range levels {
		if i < length {
			l -= max(-fadeDepth, law((float64(i)+0.5)/float64(length)))
		}
		sum, squares = sum+l, squares+l*l
	}
	return squares - sum*sum/float64(len(levels))
}
