package speech

import "math"

// levels fills in the levels and the features that are made of them.
//
//go:norace
func (a *analyst) levels(f *features, frames []frame, top int16) {
	n := len(frames)
	var whole, first, last series
	var power, product float64
	for i, k := range frames {
		v := float64(int(k.level)-int(top)) / 64
		a.level[0][i] = max(-deepest, v)
		for p, below := range k.part {
			a.level[1+p][i] = max(-deepest, v-float64(below)/2)
		}
		power += math.Exp(math.Ln10 / 10 * v)
		whole.add(a.level[0][i])
		l, h := a.level[1][i], a.level[parts][i]
		first.add(l)
		last.add(h)
		product += l * h
	}
	level := a.level[0][:n]
	quiet, rises, since := 0.0, 0.0, near
	limit := 10*math.Log10(power/float64(n)) - 6.02
	for i, v := range level {
		if v < limit {
			quiet++
		}
		since++
		if i >= near && v-level[i-near] > 6 && since > framesPerStep {
			rises++
			since = 0
		}
	}
	f[lowEnergy] = quiet / float64(n)
	f[onsets] = rises / float64(n) * framesPerSecond / 4
	f[levelSpread] = whole.spread() / 8
	p15, p50, p95 := percentiles(level)
	f[levelRange], f[levelCrest] = (p95-p15)/16, (p95-p50)/16
	f[togetherness] = (product/whole.n - first.mean()*last.mean()) / (first.spread()*last.spread() + 1)
	syllables := a.modulation(level)
	f[wholeModulation] = math.Log(1 + syllables)
	f[modulationShare] = math.Log((syllables + 0.1) / (whole.spread() + 0.1))
	for p := range parts {
		f[partModulation+p] = math.Log(1 + a.modulation(a.level[1+p][:n]))
	}
}

// modulation is the rms of a level after a band-pass from about 2.5 to 7 Hz: the difference of two running
// means, over 60 and 260 ms.
//
//go:norace
func (a *analyst) modulation(level []float64) float64 {
	const short, long = 1, 6 // frames to either side
	sum := 0.0
	for i, v := range level {
		sum += v
		a.sums[i+1] = sum
	}
	n, squares := len(level), 0.0
	if n <= 2*long+1 {
		return 0
	}
	for i := long; i < n-long; i++ {
		y := (a.sums[i+short+1]-a.sums[i-short])/(2*short+1) - (a.sums[i+long+1]-a.sums[i-long])/(2*long+1)
		squares += y * y
	}
	return math.Sqrt(squares / float64(n-2*long))
}

// rhythm is how alike the rises of the level are to themselves some time later, 1 for a machine's beat: the highest
// autocorrelation at 0.2 to 1.3 s, re that at 0 (the pulse metric of Scheirer and Slaney).
//
//go:norace
func (a *analyst) rhythm(frames []frame) float64 {
	const shortest, longest = framesPerSecond / 5, framesPerSecond * 13 / 10
	if len(frames) < 2*longest {
		return 0
	}
	rises, sum := a.rises[:len(frames)], 0.0
	top := int16(silent)
	for _, k := range frames {
		top = max(top, k.level)
	}
	at := func(k frame, p int) float64 {
		return max(-deepest, float64(int(k.level)-int(top))/64-float64(k.part[p])/2)
	}
	for i := range rises {
		rises[i] = 0
		if i >= near {
			for p := range parts {
				rises[i] += max(0, at(frames[i], p)-at(frames[i-near], p))
			}
		}
		sum += rises[i]
	}
	mean, energy, best := sum/float64(len(rises)), 1.0, 0.0
	for i := range rises {
		rises[i] -= mean
		energy += rises[i] * rises[i]
	}
	for lag := shortest; lag <= longest; lag++ {
		r := 0.0
		later := rises[lag:]
		for i, v := range later {
			r += v * rises[i]
		}
		best = max(best, r/float64(len(later)))
	}
	return best * float64(len(rises)) / energy
}

// percentiles returns the 15th, 50th and 95th of levels from -deepest to 0, to quarter of a dB.
func percentiles(level []float64) (p15, p50, p95 float64) {
	const perDB = 4
	var bins [deepest*perDB + 1]int
	for _, v := range level {
		bins[int((v+deepest)*perDB)]++
	}
	seen, n := 0, len(level)
	for i, b := range bins {
		was := seen
		seen += b
		at := float64(i)/perDB - deepest
		if 20*was <= 3*n && 20*seen > 3*n {
			p15 = at
		}
		if 2*was <= n && 2*seen > n {
			p50 = at
		}
		if 20*was <= 19*n && 20*seen > 19*n {
			p95 = at
		}
	}
	return p15, p50, p95
}
