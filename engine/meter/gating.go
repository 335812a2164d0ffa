package meter

import (
	"math"
	"slices"

	"evenshelf/engine/audio"
)

// A programme's course is kept as the weighted energy of every 100 ms step; gates, range and
// percentiles are sums over that list. Steps and the finer hops end at the nearest whole sample, so
// that their lengths differ by one sample where the rate is not a multiple of 100 Hz.
const (
	stepsPerSecond = audio.StepsPerSecond
	hopsPerStep    = 10
	momentarySteps = 4  // 400 ms
	shortTermSteps = 30 // 3 s
	rangeTail      = 15 // steps of silence that follow a programme before its range is taken: 1.5 s

	absoluteGate = -70.0 // LUFS, BS.1770 and Tech 3342
	integratedLU = 10.0  // relative gate of BS.1770, below the mean
	rangeLU      = 20.0  // relative gate of Tech 3342, below the mean

	digitalSilence = -120.0 // dBFS or LUFS: what lies below has no sound in it, be it dithered to 20 bits
)

// hopsEnd returns the frame at which a number of hops ends at a rate in Hz.
func hopsEnd(hops int64, rate int) int64 {
	return audio.Boundary(hops, hopsPerStep*stepsPerSecond, int64(rate))
}

// stepsEnd returns the frame at which a number of steps ends at a rate in Hz.
func stepsEnd(steps, rate int) int64 { return hopsEnd(int64(steps)*hopsPerStep, rate) }

// wholeSteps returns how many steps a number of frames completes.
func wholeSteps(frames int64, rate int) int {
	n := int(frames * stepsPerSecond / int64(rate)) // the last of them may end half a sample late
	if stepsEnd(n, rate) > frames {
		n--
	}
	return n
}

// loudness converts weighted mean square to LUFS; 0 gives −Inf.
func loudness(power float64) float64 { return -0.691 + 10*math.Log10(power) }

// power is the inverse of loudness.
func power(lufs float64) float64 { return math.Pow(10, (lufs+0.691)/10) }

// course is the energy of each step (sum of weighted squares) at a rate in Hz.
type course struct {
	rate   int
	energy []float64
}

// mean returns the mean power of the window of n steps that ends with step i, cut at the start.
func (c course) mean(i, n int) float64 {
	first := max(0, i+1-n)
	sum := 0.0
	for _, e := range c.energy[first : i+1] {
		sum += e
	}
	return sum / float64(stepsEnd(i+1, c.rate)-stepsEnd(first, c.rate))
}

// whole returns the mean power of every full window of n steps.
func (c course) whole(n int) []float64 {
	var p []float64
	for i := n - 1; i < len(c.energy); i++ {
		p = append(p, c.mean(i, n))
	}
	return p
}

// integrated returns the loudness of the mean power of the blocks above both gates, or Undefined.
func integrated(blocks []float64) audio.LUFS {
	floor := power(absoluteGate)
	mean, n := meanAbove(blocks, floor)
	if n == 0 {
		return audio.LUFS(audio.Undefined)
	}
	mean, _ = meanAbove(blocks, max(floor, mean*math.Pow(10, -integratedLU/10)))
	return audio.LUFS(loudness(mean))
}

// meanAbove returns the mean of the values above a gate and how many there are.
func meanAbove(values []float64, gate float64) (mean float64, n int) {
	for _, v := range values {
		if v > gate {
			mean += v
			n++
		}
	}
	return mean / float64(n), n
}

// loudnessRange returns P95 − P10 of the short-term powers that pass Tech 3342's gates, which keep a
// value that lies on them; Undefined if none passes.
func loudnessRange(shortTerm []float64) audio.LU {
	atLeast := func(gate float64) float64 { return math.Nextafter(gate, 0) }
	floor := power(absoluteGate)
	mean, n := meanAbove(shortTerm, atLeast(floor))
	if n == 0 {
		return audio.LU(audio.Undefined)
	}
	kept := sortedAbove(shortTerm, atLeast(max(floor, mean*math.Pow(10, -rangeLU/10))))
	return audio.LU(loudness(percentile(kept, 95)) - loudness(percentile(kept, 10)))
}

// sortedAbove returns the values above a gate in ascending order.
func sortedAbove(values []float64, gate float64) []float64 {
	var kept []float64
	for _, v := range values {
		if v > gate {
			kept = append(kept, v)
		}
	}
	slices.Sort(kept)
	return kept
}

// percentile returns the value of nearest rank, as Tech 3342 counts it. sorted must not be empty.
func percentile(sorted []float64, p float64) float64 {
	return sorted[int(math.Round(float64(len(sorted)-1)*p/100))]
}
